"""A real run: the same job as a rehearsal, on channels that reach instruments, in the wall clock's time."""

import uuid
from collections.abc import Callable, Mapping
from pathlib import Path

from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import Driver
from rigctl.links.channel import Channel
from rigctl.links.family import Opening
from rigctl.links.opening import open_channel
from rigctl.runner.bench import OpenChannel, emitting_roles
from rigctl.runner.guard import Guard, NoGuard, WatchdogGuard
from rigctl.runner.header import make_header
from rigctl.runner.person import Person
from rigctl.runner.progress import Progress
from rigctl.runner.run import Job
from rigctl.timeline import StopRequest, Timeline, WallTimeline

Wrap = Callable[[Channel, Timeline], Channel]


def bare(channel: Channel, _timeline: Timeline) -> Channel:
    """Wrap a channel in nothing."""
    return channel


def channel_opener(timeline: Timeline, wrap: Wrap = bare) -> OpenChannel:
    """Return what opens real channels.

    Parameters
    ----------
    wrap
        Wraps each channel, for a wire tap.
    """

    def opener(address: str, opening: Opening) -> Channel:
        return wrap(open_channel(address, timeline, opening), timeline)

    return opener


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
    wrap: Wrap = bare,
) -> Job:
    """Put a real run together; nothing is opened yet. What may emit gets a watchdog that hears its heartbeat."""
    timeline = WallTimeline(stop)
    guard: Guard = NoGuard()
    if emitting_roles(recipe, rig):
        guard = WatchdogGuard(recipe, rig, path, timeline)
        timeline.on_pulse = guard.beat
    identifier = str(uuid.uuid4())
    return Job(
        recipe=recipe,
        rig=rig,
        drivers=drivers,
        open_channel=channel_opener(timeline, wrap),
        timeline=timeline,
        person=person,
        progress=progress,
        path=path,
        header=make_header(recipe, rig, start=timeline.start, identifier=identifier, operator=operator, part=part),
        guard=guard,
    )
