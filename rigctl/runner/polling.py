"""Waits for things under way: begun all together, polled in order of due.

It owns the only polling loop of the project; it knows no instrument.
"""

import heapq
from collections.abc import Mapping
from typing import TypeVar

from rigctl.errors import InstrumentError
from rigctl.interfaces import Begun
from rigctl.timeline import Timeline

T = TypeVar("T")


def complete(timeline: Timeline, begun: Mapping[str, Begun[T]]) -> dict[str, T]:
    """Let time pass until everything begun has given its value.

    Parameters
    ----------
    begun
        What is under way, by a name that an error message may show.

    Returns
    -------
    The value of each, by the same names and in the same order.

    Errors
    ------
    `InstrumentError` when one has not finished by its `give_up_s`; whatever its poll raises; `StopRequestedError`.
    """
    waiting = [(under_way.due_s, position, name) for position, (name, under_way) in enumerate(begun.items())]
    heapq.heapify(waiting)
    values: dict[str, T] = {}
    while waiting:
        due_s, position, name = heapq.heappop(waiting)
        timeline.wait_until(due_s)
        value = begun[name].poll()
        if value is not None:
            values[name] = value
            continue
        if timeline.now() >= begun[name].give_up_s:
            raise InstrumentError(
                f"did not finish within {begun[name].give_up_s - begun[name].due_s:.1f} s of the time it was due",
                where=name,
                do="Look whether it is still moving or measuring; it may be stalled or in another mode.",
            )
        heapq.heappush(waiting, (timeline.now() + begun[name].again_s, position, name))
    return {name: values[name] for name in begun}
