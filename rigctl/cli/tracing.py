"""`--trace FILE`: the wire tap of a run."""

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from rigctl.errors import UsageError

if TYPE_CHECKING:
    from rigctl.links.channel import Channel
    from rigctl.timeline import Timeline


@contextmanager
def tapping(path: Path | None) -> "Iterator[Callable[[Channel, Timeline], Channel]]":
    """Yield what puts a tap on a channel, or leaves it as it is where no trace is wanted.

    Raises
    ------
    UsageError
        When the trace file exists or cannot be written.
    """
    if path is None:
        yield lambda channel, _timeline: channel
        return
    from rigctl.links.tap import TappedChannel

    try:
        sink = path.open("x", encoding="ascii")
    except OSError as error:
        raise UsageError(f"the trace {path} cannot be begun: {error.strerror}", do="Give another --trace.") from error
    with sink:
        yield lambda channel, timeline: TappedChannel(channel, timeline, sink)
