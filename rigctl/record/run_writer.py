"""Recording a run: every record goes to the journal at once, and the run file is rebuilt from time to time.

The run file is never open while a run lasts: each view is built whole beside it and then takes its place. A
file that was there before is never overwritten.
"""

from collections.abc import Mapping
from pathlib import Path
from types import TracebackType
from typing import Any, Self

from rigctl.errors import RecordError
from rigctl.record.collector import collector_at_rest
from rigctl.record.disk import sync_directory
from rigctl.record.journal import Journal, journal_path, parse_journal
from rigctl.record.layout import Header, check_header
from rigctl.record.publish import publish, publish_final
from rigctl.record.run import Run
from rigctl.timeline import Timeline

VIEW_EVERY_S = 10.0
VIEW_SHARE = 50.0
"""A view is due after 10 s, and 50 times the last one's duration, so that it never takes over 2 % of a
run."""


def create_run(path: Path, header: Header, *, durable: bool) -> "RunWriter":
    """Start a run file and its journal, before any instrument is touched.

    Parameters
    ----------
    path
        The run file to be; neither it nor its journal may exist.
    header
        What is known before the first record.
    durable
        Whether each record is on the disk before `append` returns and views appear while the run lasts; a
        rehearsal does without and builds its one view at the end.

    Raises
    ------
    RecordError
        When something is there already, or the disk refuses.
    """
    path = Path(path)
    check_header(header)
    # the journal claims the name first, so that no second writer can pass the check meanwhile
    journal = Journal(journal_path(path), durable=durable)
    try:
        _refuse_overwriting(path)
        journal.append(header.to_record())
        writer = RunWriter(path, header, journal, durable=durable)
        if durable:
            sync_directory(path.parent)
            writer.view()
    except BaseException:
        # nothing was measured yet: leave no trace
        journal.path.unlink()
        journal.close()
        raise
    return writer


def _refuse_overwriting(path: Path) -> None:
    if path.exists():
        raise RecordError(
            "there is a file of this name, and it is never overwritten",
            where=str(path),
            do="choose another name",
        )


class RunWriter:
    """The one writer of a run; a context manager.

    Leaving it without `close` keeps the journal, as a crash would: nothing recorded is lost, and the next
    reader folds it into the run file.
    """

    def __init__(self, path: Path, header: Header, journal: Journal, *, durable: bool) -> None:
        self.path = path
        self._blank, self._journal, self._durable = Run(header, is_live=True), journal, durable
        self._next_view_s = 0.0

    @property
    def run(self) -> Run:
        """What was recorded so far, read back from the journal: memory does not grow with the night."""
        return Run.of(parse_journal(self._journal.content()).records, is_live=True)

    def append(self, record: Mapping[str, Any]) -> None:
        """Record something; when durable it is on the disk once this returns."""
        self._blank.parse(record)
        self._journal.append(record)

    def view(self) -> None:
        """Bring the run file up to date."""
        with collector_at_rest():
            publish(self.path, self.run, self._journal.content())

    def view_if_due(self, timeline: Timeline) -> None:
        """Bring the run file up to date when that was long enough ago; a rehearsal waits for its end.

        A view that cannot be built does not end a run, since the journal has everything: it is recorded as a
        warning, and tried again later.
        """
        if not self._durable or (began_s := timeline.now()) < self._next_view_s:
            return
        try:
            self.view()
        except RecordError as error:
            self.append({"kind": "event", "t": timeline.now(), "text": f"no view: {error.what}", "level": "warning"})
        now_s = timeline.now()
        self._next_view_s = now_s + max(VIEW_EVERY_S, VIEW_SHARE * (now_s - began_s))

    def close(self, status: str, *, t_s: float, code: int = 0, why: str = "") -> None:
        """End the run: last record, last view, checked by reading it back; then the journal goes.

        Parameters
        ----------
        status
            `complete`, `stopped` or `failed`.
        t_s
            When it ended, s since the start.
        code
            Exit code of the program.
        why
            A sentence, where it did not go to its end.

        Raises
        ------
        RecordError
            When the disk refuses; the journal is then kept.
        """
        try:
            self.append({"kind": "end", "t": t_s, "status": status, "code": code, "why": why})
            with collector_at_rest():
                publish_final(self.path, self.run, self._journal.content())
        finally:
            self._journal.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._journal.close()
