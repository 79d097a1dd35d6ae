"""A rehearsal: the whole run on twins in virtual time, the same bytes, from one seed.

It owns the virtual start time, the identifiers that derive from the seed, and the simulated person. The twins
are a plugin's.
"""

import uuid
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import Bench, BenchFactory, Driver
from rigctl.links.channel import Channel
from rigctl.links.loopback import LoopbackChannel
from rigctl.runner.header import make_header
from rigctl.runner.progress import Progress
from rigctl.runner.run import Job
from rigctl.timeline import StopRequest, Timeline, VirtualTimeline

FIRST_EVENING = datetime(2026, 1, 5, 18, 0, tzinfo=UTC)
"""The virtual evening of seed 0; each seed has an evening of its own."""


@dataclass(frozen=True, slots=True)
class SimulatedPerson:
    """Blocks the simulated beam at once when asked."""

    bench: Bench
    timeline: Timeline
    is_there: bool = True

    def block_beam(self) -> None:
        """Put something into the beam."""
        self.bench.block_by_hand(True, self.timeline.now())

    def clear_beam(self) -> None:
        """Take it away."""
        self.bench.block_by_hand(False, self.timeline.now())

    def cap_detectors(self) -> None:
        """Put the caps on."""
        self.bench.cap_by_hand(True, self.timeline.now())

    def uncap_detectors(self) -> None:
        """Take the caps off."""
        self.bench.cap_by_hand(False, self.timeline.now())

    def take_out(self, element: str) -> None:
        """Take an element out of the beam."""
        self.bench.take_out_by_hand(element, True, self.timeline.now())

    def put_in(self, element: str) -> None:
        """Put an element back."""
        self.bench.take_out_by_hand(element, False, self.timeline.now())


def rehearsal_job(  # noqa: PLR0913  # a rehearsal is put together from this many independent parts
    recipe: Recipe,
    rig: Rig,
    *,
    drivers: Mapping[str, Driver],
    factory: BenchFactory,
    seed: int,
    path: Path,
    progress: Progress,
    stop: StopRequest | None = None,
    wrap: Callable[[Channel, Timeline], Channel] = lambda channel, _timeline: channel,
) -> Job:
    """Put a rehearsal together: the recipe and rig of the real run, every address answered by its twin.

    Parameters
    ----------
    wrap
        Wraps each channel, for a wire tap.
    """
    timeline = VirtualTimeline(FIRST_EVENING + timedelta(days=seed % 3650), stop)
    bench = factory.build(recipe, rig, seed)
    identifier = uuid.uuid5(uuid.NAMESPACE_OID, f"{recipe.sha256} {rig.sha256} {seed}")
    header = make_header(recipe, rig, start=timeline.start, identifier=str(identifier))
    return Job(
        recipe=recipe,
        rig=rig,
        drivers=drivers,
        open_channel=lambda address, _opening: wrap(LoopbackChannel(address, bench.twin(address), timeline), timeline),
        timeline=timeline,
        person=SimulatedPerson(bench, timeline),
        progress=progress,
        path=path,
        header=replace(header, is_simulated=True, seed=seed, truth=dict(bench.truth())),
        is_durable=False,
    )
