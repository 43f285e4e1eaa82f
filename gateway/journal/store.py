"""The journal file as its one writer sees it: a run begins, batches are committed, the run ends. Synchronous.

Whatever SQLite says about the disk leaves as `apsw.Error`, with nothing of the batch written. A record that can never
be written, whatever the disk does, is left out and named, so that it cannot block those behind it.

A commit that was reported as failed may still be found on the disk when the file is opened again: its synchronisation
failed, its pages did not. Writing the same period again is therefore no error, and the same event may be told twice.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

import apsw

from gateway.journal import codec
from gateway.journal.backlog import Batch, Note
from gateway.journal.database import Opened, open_to_write, transaction
from gateway.journal.records import Event, PeriodRecord, RunEnd, RunStart
from gateway.journal.schema import JOURNAL

Open = Callable[[bool], Opened]
"""How to come by a connection, at the start and again after a failure; the argument says whether to check the file."""


@dataclass(frozen=True)
class Unrecordable:
    """A record that no disk would take, and why."""

    record: PeriodRecord | Note
    error: Exception


class Store:
    """One connection, one run.

    Args:
        open_: opens the file; called again by `reopen`.
        run: the run; its row is written at once, and again wherever it is missing after `reopen`.

    Raises:
        StorageError: from `open_`.
        apsw.Error: the run's row could not be written.
    """

    def __init__(self, open_: Open, run: RunStart) -> None:
        self._open = open_
        self._run = run
        self._connection: apsw.Connection | None = None
        self.aside: Path | None = None
        """Where a damaged file was moved the last time one was opened."""
        self._number = 0
        try:
            self._begin("INSERT", check=True)
        except apsw.ConstraintError as error:
            raise ValueError(f"run id {run.id!r} is in the journal already; give each run its own") from error

    @classmethod
    def at(cls, path: Path, run: RunStart, wall_ns: Callable[[], int]) -> Store:
        """Store of the journal at this path."""
        return cls(lambda check: open_to_write(path, JOURNAL, wall_ns(), check=check), run)

    def reopen(self, *, check: bool) -> None:
        """Close and open the file, if need be checking it as at the start, and make sure it knows the run.

        Raises:
            StorageError: the file cannot be opened.
            apsw.Error: the run's row could not be written.
        """
        self.close()
        self._begin("INSERT OR IGNORE", check=check)

    def commit(self, batch: Batch) -> tuple[Unrecordable, ...]:
        """Write a batch in one transaction, on the disk when this returns; return what was left out.

        Raises:
            apsw.Error: nothing was written.
        """
        connection = self._connected()
        with transaction(connection):
            left_out = [self._insert(connection, record) for record in (*batch.periods, *batch.notes)]
            for loss in batch.losses:
                connection.execute(_LOSS, (self._number, *codec.loss_columns(loss)))
        return tuple(record for record in left_out if record is not None)

    def end(self, ended_ns: int, how: RunEnd) -> None:
        """Mark the run as ended.

        Raises:
            apsw.Error: it could not be marked.
        """
        connection = self._connected()
        with transaction(connection):
            connection.execute("UPDATE runs SET ended_ns = ?, how = ? WHERE number = ?", (ended_ns, how, self._number))

    def close(self) -> None:
        """Close the connection, if there is one; what is committed is on the disk already."""
        connection, self._connection = self._connection, None
        if connection is not None:
            connection.close()

    def _begin(self, verb: str, *, check: bool) -> None:
        opened = self._open(check)
        try:
            with transaction(opened.connection):
                opened.connection.execute(_insert("runs", codec.RUN, verb), codec.run_columns(self._run))
            number = opened.connection.execute("SELECT number FROM runs WHERE id = ?", (self._run.id,)).get
        except BaseException:
            opened.connection.close()
            raise
        self._connection, self.aside, self._number = opened.connection, opened.aside, int(number)

    def _connected(self) -> apsw.Connection:
        if self._connection is None:
            raise apsw.CantOpenError("the journal is closed")
        return self._connection

    def _insert(self, connection: apsw.Connection, record: PeriodRecord | Note) -> Unrecordable | None:
        try:
            if isinstance(record, PeriodRecord):
                sql, columns = _PERIOD, codec.period_columns(record)
            elif isinstance(record, Event):
                sql, columns = _EVENT, codec.event_columns(record)
            else:
                sql, columns = _OUTCOME, codec.outcome_columns(record)
            connection.execute(sql, (self._number, *columns))
        except (TypeError, ValueError, OverflowError, apsw.ConstraintError, apsw.TooBigError) as error:
            # A failed INSERT undoes itself alone (SQLite, "ON CONFLICT": ABORT); the transaction goes on.
            return None if self._there(connection, record) else Unrecordable(record, error)
        return None

    def _there(self, connection: apsw.Connection, record: PeriodRecord | Note) -> bool:
        """Whether this very period is recorded already."""
        if not isinstance(record, PeriodRecord):
            return False
        try:
            columns = codec.period_columns(record)
            found = list(connection.execute(_FIND_PERIOD, (self._number, record.k)))
        except (TypeError, ValueError, OverflowError):
            return False
        return found == [columns]


def _insert(table: str, names: Sequence[str], verb: str = "INSERT") -> str:
    return f"{verb} INTO {table} ({', '.join(names)}) VALUES ({', '.join('?' * len(names))})"


_PERIOD = _insert("periods", ("run", *codec.PERIOD))
_FIND_PERIOD = f"SELECT {', '.join(codec.PERIOD)} FROM periods WHERE run = ? AND k = ?"
_EVENT = _insert("events", ("run", *codec.EVENT))
_OUTCOME = _insert("outcomes", ("run", *codec.OUTCOME))
_LOSS = _insert("lost", ("run", *codec.LOSS))
