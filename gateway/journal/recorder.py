"""Backlog to disk, one attempt at a time: alarms, back-off while the disk refuses, and telling the gap afterwards.

No thread and no waiting in here; `writer` calls `attempt` again after as many seconds as it was told.

An attempt takes what waits, and the losses counted so far, and commits both in one transaction. If SQLite refuses
(full disk, I/O error), everything stays where it is, an alarm tells it once, and the next attempt opens the file anew,
checking it if it was called damaged. When it works again, the journal itself tells when it failed, when it recovered
and what it lacks.

Alarms. An alarm is what needs a person to act (alarm practice, IEC 62682): one per cause, not one per period.

    failing       the file cannot be written; the notice says why
    behind        half of the queue is in use: the disk is too slow, or failing
    losing        the queue is full, records are being lost
    recovered     the file is written again and the queue is short; ends the three above
    unrecordable  a record of ours is of a form no disk would take; told once per run
    dead          the journal's thread died of an error of ours; nothing is recorded any more
"""

from __future__ import annotations

import threading
from collections.abc import Callable
from dataclasses import dataclass, replace
from enum import StrEnum

import apsw
import msgspec

from gateway import sentences
from gateway.journal.backlog import Backlog, Batch, Fate, Note
from gateway.journal.exceptions import StorageError
from gateway.journal.records import Event, Loss, PeriodRecord, RunEnd
from gateway.journal.store import Store

FIRST_RETRY_S = 0.1
LONGEST_RETRY_S = 5.0
BATCH = 256
"""Most periods, and most events, in one transaction: bounds how long a commit takes after an outage."""


class AlarmKind(StrEnum):
    """What is wrong with the journal; see the head of the module."""

    FAILING = "failing"
    BEHIND = "behind"
    LOSING = "losing"
    RECOVERED = "recovered"
    UNRECORDABLE = "unrecordable"
    DEAD = "dead"


_PASSING = frozenset({AlarmKind.FAILING, AlarmKind.BEHIND, AlarmKind.LOSING})


@dataclass(frozen=True)
class Alarm:
    """What a person should know about the journal now."""

    kind: AlarmKind
    notice: sentences.Notice


@dataclass(frozen=True)
class Progress:
    """Counters of what reached the disk since the start."""

    periods: int = 0
    notes: int = 0
    last_k: int | None = None
    failed_attempts: int = 0
    failing: bool = False
    last_error: str = ""


def retry_s(failures: int) -> float:
    """Seconds to wait after this many failures in a row: doubling from `FIRST_RETRY_S` up to `LONGEST_RETRY_S`."""
    return min(LONGEST_RETRY_S, FIRST_RETRY_S * 2.0 ** min(failures - 1, 32))


class Recorder:
    """Moves records from a backlog to a store.

    Args:
        store: where they go; used by `attempt` and `close` alone, so by one thread.
        backlog: where they wait.
        alarm: told of each alarm, by whichever thread noticed it: must be quick, thread-safe, and never raise.
        wall_ns: now, Unix nanoseconds.
    """

    def __init__(
        self, store: Store, backlog: Backlog, *, alarm: Callable[[Alarm], None], wall_ns: Callable[[], int]
    ) -> None:
        self._store = store
        self._backlog = backlog
        self._alarm = alarm
        self._wall_ns = wall_ns
        self._lock = threading.Lock()
        self._raised: set[AlarmKind] = set()
        self._lost_before = 0
        self._failures = 0
        self._failures_told = 0
        self._suspect = False
        self.progress = Progress()
        self._tell_aside()

    def put_period(self, record: PeriodRecord) -> bool:
        """Queue a period by the backlog's rule; False when it is lost. Never blocks, never raises."""
        return self._judge(self._backlog.put_period(record))

    def put_note(self, note: Note) -> bool:
        """Queue an event or an outcome by the backlog's rule; False when it is lost. Never blocks, never raises."""
        return self._judge(self._backlog.put_note(note))

    def attempt(self) -> float | None:
        """Try to write what waits.

        Returns:
            Seconds to wait before the next attempt: 0 when more waits already, None when nothing does.
        """
        batch = self._backlog.peek(BATCH)
        if len(batch) == 0:
            return None
        try:
            self._mend()
            left_out = self._store.commit(self._dated(batch))
        except (apsw.Error, StorageError) as error:
            self._backlog.keep()
            return self._failed(error)
        self._backlog.done()
        for unrecordable in left_out:
            self._backlog.lose(unrecordable.record, f"cannot be recorded ({type(unrecordable.error).__name__})")
            self._raise(AlarmKind.UNRECORDABLE, sentences.journal_unrecordable(str(unrecordable.error)))
        self._succeeded(batch, {id(unrecordable.record) for unrecordable in left_out})
        return None if self._backlog.empty else 0.0

    def end(self, ended_ns: int, how: RunEnd) -> float | None:
        """Try to mark the run as ended; None when that is on the disk, else seconds to wait before the next attempt."""
        try:
            self._mend()
            self._store.end(ended_ns, how)
        except (apsw.Error, StorageError) as error:
            return self._failed(error)
        return None

    def dead(self, error: BaseException) -> None:
        """Tell that the thread which called `attempt` is gone."""
        self._raise(AlarmKind.DEAD, sentences.journal_dead(f"{type(error).__name__}: {error}"))

    def _mend(self) -> None:
        """After a failure, start from a connection that knows nothing of it."""
        if self._failures:
            self._store.reopen(check=self._suspect)
            self._tell_aside()

    def _dated(self, batch: Batch) -> Batch:
        """The batch as it is written: every loss dated, and told by an event beside it."""
        now_ns = self._wall_ns()
        told = tuple(
            Event.of(sentences.journal_lost(loss.what, loss.cause, loss.count, loss.first_k, loss.last_k), now_ns)
            for loss in batch.losses
        )
        dated: tuple[Loss, ...] = tuple(msgspec.structs.replace(loss, wall_ns=now_ns) for loss in batch.losses)
        return Batch(batch.periods, (*batch.notes, *told), dated)

    def _failed(self, error: Exception) -> float:
        self._failures += 1
        self._failures_told += 1
        self._suspect = isinstance(error, apsw.CorruptError | apsw.NotADBError)
        text = f"{type(error).__name__}: {error}"
        self.progress = replace(
            self.progress, failed_attempts=self.progress.failed_attempts + 1, failing=True, last_error=text
        )
        self._raise(AlarmKind.FAILING, sentences.journal_failing(text), journaled=True)
        return retry_s(self._failures)

    def _succeeded(self, batch: Batch, left_out: set[int]) -> None:
        periods = [record for record in batch.periods if id(record) not in left_out]
        notes = [note for note in batch.notes if id(note) not in left_out]
        self.progress = replace(
            self.progress,
            periods=self.progress.periods + len(periods),
            notes=self.progress.notes + len(notes),
            last_k=periods[-1].k if periods else self.progress.last_k,
            failing=False,
        )
        self._failures = 0
        if len(self._backlog) > self._backlog.capacity // 4:
            return
        with self._lock:
            recovered = not self._raised.isdisjoint(_PASSING)
            self._raised -= _PASSING
        if recovered:
            lost = sum(self._backlog.lost)
            notice = sentences.journal_recovered(self._failures_told, lost - self._lost_before)
            self._lost_before, self._failures_told = lost, 0
            self._put_event(notice)
            self._alarm(Alarm(AlarmKind.RECOVERED, notice))

    def _judge(self, fate: Fate) -> bool:
        depth, capacity = len(self._backlog), self._backlog.capacity
        if depth >= capacity // 2:
            self._raise(AlarmKind.BEHIND, sentences.journal_behind(depth, capacity), journaled=True)
        if fate is not Fate.QUEUED:
            self._raise(AlarmKind.LOSING, sentences.journal_losing(f"all {capacity} places of its queue are taken"))
        return fate is not Fate.LOST

    def _raise(self, kind: AlarmKind, notice: sentences.Notice, *, journaled: bool = False) -> None:
        with self._lock:
            if kind in self._raised:
                return
            self._raised.add(kind)
        if journaled:
            self._put_event(notice)
        self._alarm(Alarm(kind, notice))

    def _put_event(self, notice: sentences.Notice) -> None:
        self._backlog.put_note(Event.of(notice, self._wall_ns()))

    def _tell_aside(self) -> None:
        if self._store.aside is not None:
            self._put_event(sentences.moved_aside("journal", self._store.aside.name))
