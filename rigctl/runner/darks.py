"""Darks of three kinds, each recorded as what it was.

dark: the beam blocked at the source. background: the source off, the way open. zero: the detectors capped.
It owns how each is brought about and undone; each is taken on every range that the readings were taken on.
"""

from collections.abc import Iterator

from rigctl.files.recipe import BY_HAND, Dark, Recipe
from rigctl.record.records import dwell_record
from rigctl.runner.bench import OpenBench
from rigctl.runner.person import Person
from rigctl.runner.plan import DARK_DWELLS, settle_s
from rigctl.runner.polling import complete
from rigctl.runner.visiting import Record, Visiting
from rigctl.timeline import Timeline


def needs_hands(recipe: Recipe, *, has_shutter: bool) -> bool:
    """Whether any dark of a recipe needs somebody's hands."""
    return any(dark.kind == "zero" or is_by_hand(dark, has_shutter=has_shutter) for dark in recipe.darks)


def is_by_hand(dark: Dark, *, has_shutter: bool) -> bool:
    """Whether the beam is blocked by hand for a dark."""
    return dark.kind == "dark" and (dark.by == BY_HAND or not has_shutter)


class Darkness:
    """Takes darks on an open bench."""

    def __init__(self, bench: OpenBench, timeline: Timeline, visiting: Visiting, person: Person) -> None:
        self.bench, self.timeline, self.visiting, self.person = bench, timeline, visiting, person
        self._is_blocked_by_hand = False
        self.last_s: dict[str, float] = {}
        """When the last dark of each kind ended, s."""

    def take(self, dark: Dark, step: str, when: str) -> list[Record]:
        """Take a dark of any kind; return a record for each dwell. A blocked beam stays so until `let_light_in`."""
        how = {"dark": self._block, "background": self._open_way, "zero": self._cap}[dark.kind](dark)
        records = []
        for _ in self._on_each_range():
            self.visiting.wait(settle_s(self.bench.recipe.steps[0], self.visiting.slowest_s()))
            records += [self._dwell(dark.kind, step, when, how=how) for _ in range(DARK_DWELLS)]
        if dark.kind == "zero":
            self.person.uncap_detectors()
        if dark.kind == "background":
            self.set_shutter(is_open=False)
        self.last_s[dark.kind] = self.timeline.now()
        return records

    def is_due(self, dark: Dark) -> bool:
        """Whether a timed dark is due now."""
        return dark.every_s is not None and self.timeline.now() - self.last_s.get(dark.kind, 0.0) >= dark.every_s

    def let_light_in(self) -> None:
        """Open the shutter, and ask for the hand's block to be taken away where there is one."""
        self.set_shutter(is_open=True)
        if self._is_blocked_by_hand:
            self.person.clear_beam()
            self._is_blocked_by_hand = False

    def set_shutter(self, *, is_open: bool) -> None:
        """Open or close the shutter, where there is one."""
        if self.bench.shutter is not None:
            self.bench.has_let_light_in |= is_open
            complete(self.timeline, {self.bench.shutter_role: self.bench.shutter.begin_set(is_open)})

    def _on_each_range(self) -> Iterator[None]:
        """Put the meters on every range that they were used on, one after another, and back at the end."""
        standing_w = {role: self.visiting.range_w(role) for role in self.bench.meters}
        used = {role: sorted({*self.visiting.used_ranges_w[role], standing_w[role]}) for role in standing_w}
        for at in range(max(map(len, used.values()))):
            for role, ranges_w in used.items():
                self._use(role, ranges_w[min(at, len(ranges_w) - 1)])
            yield
        for role, range_w in standing_w.items():
            self._use(role, range_w)

    def _use(self, role: str, range_w: float) -> None:
        if self.visiting.range_w(role) != range_w:
            self.visiting.use_range(role, range_w)

    def _dwell(self, kind: str, step: str, when: str, *, how: str) -> Record:
        began_s = self.timeline.now()
        detectors = {role: dwell_record(dwell) for role, dwell in self.visiting.dwell().items()}
        times = {"t_begin": began_s, "t_end": self.timeline.now()}
        return {"kind": "dark", "what": kind, "step": step, "when": when, "how": how, **times, "detectors": detectors}

    def _block(self, dark: Dark) -> str:
        if not is_by_hand(dark, has_shutter=self.bench.shutter is not None):
            self.set_shutter(is_open=False)
            return "by shutter"
        if not self._is_blocked_by_hand:
            self.person.block_beam()
            self._is_blocked_by_hand = True
        return "by hand"

    def _open_way(self, _dark: Dark) -> str:
        self.set_shutter(is_open=True)
        return "source off"

    def _cap(self, _dark: Dark) -> str:
        self.person.cap_detectors()
        return "by hand"
