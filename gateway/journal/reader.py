"""The journal as everybody but control sees it: read-only, at any time, also while it is being written.

A reader sees what was committed when it asked. It never holds a read transaction while its caller works: an open one
would keep the writer's log from being reused, and the log would grow without end. `periods` therefore reads ahead in
chunks.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from pathlib import Path
from types import TracebackType
from typing import Self, TypeVar

import apsw
import msgspec

from gateway.journal import codec
from gateway.journal.database import open_to_read
from gateway.journal.exceptions import StorageDamagedError
from gateway.journal.records import Event, Loss, Outcome, PeriodRecord, RunRecord
from gateway.journal.schema import JOURNAL

CHUNK = 256
"""Periods read in one go."""

T = TypeVar("T")
_Row = Sequence[object]


class JournalReader:
    """A read-only connection; used by one thread at a time.

    Args:
        path: the journal.

    Raises:
        StorageMissingError: there is no journal yet.
        StorageForeignError: the file is not a journal.
        StorageVersionError: the file is of another schema version.
        StorageDamagedError: the file cannot be read; every method may raise this, too.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self._connection = open_to_read(path, JOURNAL)

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Let go of the file; safe to call twice."""
        self._connection.close()

    def runs(self) -> tuple[RunRecord, ...]:
        """All runs, oldest first."""
        return self._rows(f"{_RUNS} ORDER BY number", (), codec.run_of)

    def run(self, run: str) -> RunRecord:
        """One run.

        Raises:
            KeyError: there is no run of this id.
        """
        rows = self._rows(f"{_RUNS} WHERE id = ?", (run,), codec.run_of)
        if not rows:
            raise KeyError(run)
        return rows[0]

    def span(self, run: str) -> tuple[int, int] | None:
        """First and last recorded k of a run; None when it has no period."""
        sql = "SELECT min(k), max(k) FROM periods WHERE run = (SELECT number FROM runs WHERE id = ?)"
        ((first, last),) = self._rows(sql, (run,), tuple)
        return (first, last) if isinstance(first, int) and isinstance(last, int) else None

    def periods(self, run: str, k0: int, k1: int) -> Iterator[PeriodRecord]:
        """Periods k0 <= k < k1 of a run that were recorded, by k."""
        sql = (
            f"SELECT {_list(codec.PERIOD)} FROM periods WHERE run = (SELECT number FROM runs WHERE id = ?) "
            f"AND k >= ? AND k < ? ORDER BY k LIMIT {CHUNK}"
        )
        while chunk := self._rows(sql, (run, k0, k1), codec.period_of):
            yield from chunk
            k0 = chunk[-1].k + 1

    def events(self, run: str, since: int = 0, limit: int = 10_000) -> tuple[Event, ...]:
        """Events of a run in the order they were told, those after event number `since`, at most `limit`."""
        return self._of_run("events", codec.EVENT, run, since, limit, codec.event_of)

    def outcomes(self, run: str, since: int = 0, limit: int = 10_000) -> tuple[Outcome, ...]:
        """What became of the requests made to a run, in the order they were answered."""
        return self._of_run("outcomes", codec.OUTCOME, run, since, limit, codec.outcome_of)

    def losses(self, run: str, since: int = 0, limit: int = 10_000) -> tuple[Loss, ...]:
        """What could not be recorded of a run; empty is what a night should end with."""
        return self._of_run("lost", codec.LOSS, run, since, limit, codec.loss_of)

    def _of_run(
        self, table: str, names: tuple[str, ...], run: str, since: int, limit: int, decode: Callable[[_Row], T]
    ) -> tuple[T, ...]:
        sql = (
            f"SELECT seq, {_list(names)} FROM {table} WHERE run = (SELECT number FROM runs WHERE id = ?) "
            "AND seq > ? ORDER BY seq LIMIT ?"
        )
        return self._rows(sql, (run, since, limit), decode)

    def _rows(self, sql: str, bindings: tuple[str | int, ...], decode: Callable[[_Row], T]) -> tuple[T, ...]:
        try:
            return tuple(decode(row) for row in list(self._connection.execute(sql, bindings)))
        except (apsw.CorruptError, apsw.NotADBError, apsw.IOError, msgspec.DecodeError) as error:
            raise StorageDamagedError(f"the journal at {self._path} cannot be read: {error}") from error


def _list(names: tuple[str, ...]) -> str:
    return ", ".join(names)


_RUNS = f"SELECT {_list((*codec.RUN, *codec.RUN_END))} FROM runs"
