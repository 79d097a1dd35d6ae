"""A run as it is read back, or as it grows: its header and records, folded into visits and darks.

It does no input or output.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from typing import Any, Self

from rigctl.readings import Identity
from rigctl.record.layout import Header
from rigctl.record.records import (
    KEYS,
    Dark,
    Visit,
    check_dark,
    check_keys,
    check_visit,
    parse_dark,
    parse_visit,
)


class Run:
    """Everything a run recorded, in the order of time.

    `status` is `running` while it is recorded; `complete`, `stopped` or `failed` as it was closed;
    `recovered` when it was never closed and its journal was read instead.
    """

    def __init__(self, header: Header, *, is_live: bool) -> None:
        self.header, self.is_live = header, is_live
        self.records: list[Mapping[str, Any]] = []
        self.attempts: list[Visit] = []
        self.darks: list[Dark] = []
        self._by_kind: dict[str, list[Mapping[str, Any]]] = {kind: [] for kind in KEYS}

    def parse(self, record: Mapping[str, Any]) -> Visit | Dark | None:
        """Check a record against the header and return what it holds; `RecordError` when it does not fit."""
        check_keys(record)
        kind = record["kind"]
        if kind == "visit":
            visit = parse_visit(record)
            check_visit(visit, self.header)
            return visit
        if kind == "dark":
            dark = parse_dark(record)
            check_dark(dark, self.header)
            return dark
        return None

    def keep(self, record: Mapping[str, Any], parsed: Visit | Dark | None) -> None:
        """Take in a record that was parsed; where a twin says who it is, the run is a simulated one."""
        self.records.append(record)
        self._by_kind[record["kind"]].append(record)
        if isinstance(parsed, Visit):
            self.attempts.append(parsed)
        elif isinstance(parsed, Dark):
            self.darks.append(parsed)
        elif record["kind"] == "identity" and Identity(**record["identity"]).is_simulated:
            self.header = replace(self.header, is_simulated=True)

    @classmethod
    def of(cls, records: Sequence[Mapping[str, Any]], *, is_live: bool) -> Self:
        """Return the run whose records these are, the header first."""
        run = cls(Header.from_record(records[0]), is_live=is_live)
        for record in records:
            run.keep(record, run.parse(record))
        return run

    def of_kind(self, kind: str) -> list[Mapping[str, Any]]:
        """Return the records of one kind, oldest first."""
        return self._by_kind[kind]

    @property
    def end(self) -> Mapping[str, Any] | None:
        """The record that closed the run; None while there is none."""
        ends = self._by_kind["end"]
        return ends[-1] if ends else None

    @property
    def status(self) -> str:
        """How the run ended, or that it did not."""
        if self.end is not None:
            return str(self.end["status"])
        return "running" if self.is_live else "recovered"

    @property
    def duration_s(self) -> float:
        """From the start to the last thing recorded, s."""
        times = [visit.ended_s for visit in self.attempts[-1:]] + [dark.ended_s for dark in self.darks[-1:]]
        times += [float(record["t"]) for kind in ("event", "reading", "end") for record in self._by_kind[kind][-1:]]
        return max(times, default=0.0)

    def visits(self, step: str) -> list[Visit]:
        """Return the last good attempt at each visit of a step, in the order of time."""
        last = {visit.index: visit for visit in self._attempts(step) if visit.status == "ok"}
        return sorted(last.values(), key=lambda visit: visit.began_s)

    def placed(self, step: str) -> list[Visit]:
        """Return what fills the grid: a visit's last good attempt, or the last one where none was good."""
        last: dict[tuple[int, ...], Visit] = {}
        for visit in self._attempts(step):
            if visit.status == "ok" or visit.index not in last or last[visit.index].status != "ok":
                last[visit.index] = visit
        return list(last.values())

    def _attempts(self, step: str) -> Iterator[Visit]:
        self.header.step(step)
        return (visit for visit in self.attempts if visit.step == step)
