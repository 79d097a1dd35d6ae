"""A real run: the same job as a rehearsal, on channels that reach instruments, in the wall clock's time."""

import uuid
from collections.abc import Callable, Mapping
from pathlib import Path

from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import Driver
from rigctl.links.channel import Channel
from rigctl.links.tcp import TcpChannel
from rigctl.runner.header import make_header
from rigctl.runner.person import Person
from rigctl.runner.progress import Progress
from rigctl.runner.run import Job
from rigctl.timeline import StopRequest, Timeline, WallTimeline


def real_job(  # noqa: PLR0913  # a run is put together from this many independent parts
    recipe: Recipe,
    rig: Rig,
    *,
    drivers: Mapping[str, Driver],
    path: Path,
    person: Person,
    progress: Progress,
    stop: StopRequest,
    operator: str = "",
    part: str = "",
    wrap: Callable[[Channel, Timeline], Channel] = lambda channel, _timeline: channel,
) -> Job:
    """Put a real run together; nothing is opened yet.

    Parameters
    ----------
    wrap
        Wraps each channel, for a wire tap.
    """
    timeline = WallTimeline(stop)
    identifier = str(uuid.uuid4())
    return Job(
        recipe=recipe,
        rig=rig,
        drivers=drivers,
        open_channel=lambda address: wrap(TcpChannel(address, timeline), timeline),
        timeline=timeline,
        person=person,
        progress=progress,
        path=path,
        header=make_header(recipe, rig, start=timeline.start, identifier=identifier, operator=operator, part=part),
    )
