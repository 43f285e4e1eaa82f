"""The journal as control sees it: put and go on. One thread behind it does the writing.

What blocks and what does not: `put_*` and `statistics` never do. `open`, `flush` and `close` do, and have no place in a
period (a soak in virtual time flushes between periods, since no real time passes in which the thread could write).
"""

from __future__ import annotations

import threading
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import apsw

from gateway.journal.backlog import Backlog, Note
from gateway.journal.exceptions import StorageUnwritableError
from gateway.journal.lock import WriterLock
from gateway.journal.previous import LastRun, last_run
from gateway.journal.recorder import Alarm, Recorder
from gateway.journal.records import Event, Outcome, PeriodRecord, RunEnd, RunStart
from gateway.journal.store import Store

CAPACITY = 1200
"""Records that may wait: ten minutes of periods at 500 ms."""


@dataclass(frozen=True)
class JournalStatistics:
    """Snapshot of the journal's counters since it was opened.

    Attributes:
        depth: records waiting or being written.
        capacity: most that may.
        periods: periods on the disk.
        notes: events and outcomes on the disk.
        last_k: last period on the disk; None before the first.
        lost_periods: periods lost, for whatever reason.
        lost_notes: events and outcomes lost.
        failed_attempts: commits the disk refused.
        failing: whether the last one was refused.
        last_error: what was said when it was.
        alive: whether the thread lives.
    """

    depth: int
    capacity: int
    periods: int
    notes: int
    last_k: int | None
    lost_periods: int
    lost_notes: int
    failed_attempts: int
    failing: bool
    last_error: str
    alive: bool


class Journal:
    """One run being recorded; made by `open`.

    Overflow rule: `gateway.journal.backlog`. Alarms: `gateway.journal.recorder`.

    Attributes:
        previous: how the run before this one ended.
        aside: where a damaged predecessor of the file was moved; None if there was none.
    """

    def __init__(
        self,
        store: Store,
        run: RunStart,
        *,
        alarm: Callable[[Alarm], None],
        wall_ns: Callable[[], int],
        capacity: int = CAPACITY,
        previous: LastRun,
        lock: WriterLock | None = None,
    ) -> None:
        self.previous = previous
        self.aside = store.aside
        self._sections = len(run.layout.sections)
        self._store = store
        self._lock = lock
        self._backlog = Backlog(capacity)
        self._recorder = Recorder(store, self._backlog, alarm=alarm, wall_ns=wall_ns)
        self._turn = threading.Condition()
        self._end: tuple[int, RunEnd] | None = None
        self._give_up_s = 0.0
        self._ended = False
        self._dead = False
        self._thread = threading.Thread(target=self._work, name="journal", daemon=True)
        self._thread.start()

    @classmethod
    def open(
        cls,
        path: Path,
        run: RunStart,
        *,
        alarm: Callable[[Alarm], None],
        wall_ns: Callable[[], int],
        capacity: int = CAPACITY,
    ) -> Journal:
        """Lock the file, check it, begin the run, start the thread. The run is on the disk when this returns.

        Args:
            path: the journal, created if it is not there; its folder must be.
            run: what is known of the run.
            alarm: told of alarms by any thread: must be quick, thread-safe, and never raise.
            wall_ns: now, Unix nanoseconds.
            capacity: most records that may wait.

        Raises:
            StorageBusyError: another process records into this file.
            StorageForeignError, StorageVersionError: the file is not one we may write.
            StorageUnwritableError: it cannot be written; nothing starts without a journal.
            ValueError: the run's id was used before.
        """
        lock = WriterLock(path)
        try:
            previous = last_run(path)
            store = Store.at(path, run, wall_ns)
        except apsw.Error as error:
            lock.release()
            raise StorageUnwritableError(f"the journal at {path} cannot be written: {error}. Make room.") from error
        except BaseException:
            lock.release()
            raise
        return cls(store, run, alarm=alarm, wall_ns=wall_ns, capacity=capacity, previous=previous, lock=lock)

    def put_period(self, record: PeriodRecord) -> bool:
        """Record a period, soon; False when it is lost already. Never blocks.

        Raises:
            ValueError: it does not have one row per section of the run's layout.
        """
        if len(record.sections) != self._sections:
            raise ValueError(
                f"period {record.k} has {len(record.sections)} section rows, the run's layout has {self._sections}"
            )
        return self._put(record)

    def put_event(self, event: Event) -> bool:
        """Record an event, soon; False when it is lost already. Never blocks."""
        return self._put(event)

    def put_outcome(self, outcome: Outcome) -> bool:
        """Record what became of a request, soon; False when it is lost already. Never blocks."""
        return self._put(outcome)

    def flush(self, timeout_s: float) -> bool:
        """Wait until everything put so far is on the disk; False when it is not by then."""
        with self._turn:
            return self._turn.wait_for(lambda: self._backlog.empty or self._dead, timeout_s) and not self._dead

    def close(self, ended_ns: int, how: RunEnd, timeout_s: float = 10.0) -> bool:
        """Write what waits, mark the run as ended, and stop the thread; safe to call twice.

        Returns:
            Whether the end is on the disk. If not, the next start will take this run for an unclean one.
        """
        with self._turn:
            if self._end is None:
                self._end = (ended_ns, how)
                self._give_up_s = time.monotonic() + timeout_s
            self._turn.notify_all()
        self._thread.join(timeout_s + 1.0)
        return self._ended

    def statistics(self) -> JournalStatistics:
        """Counters so far."""
        progress, lost = self._recorder.progress, self._backlog.lost
        return JournalStatistics(
            depth=len(self._backlog),
            capacity=self._backlog.capacity,
            periods=progress.periods,
            notes=progress.notes,
            last_k=progress.last_k,
            lost_periods=lost[0],
            lost_notes=lost[1],
            failed_attempts=progress.failed_attempts,
            failing=progress.failing,
            last_error=progress.last_error,
            alive=self._thread.is_alive(),
        )

    def _put(self, record: PeriodRecord | Note) -> bool:
        if self._dead or self._end is not None:
            self._backlog.lose(record, "the journal was closed" if self._end else "the journal's thread is dead")
            return False
        kept = (
            self._recorder.put_period(record) if isinstance(record, PeriodRecord) else self._recorder.put_note(record)
        )
        with self._turn:
            self._turn.notify_all()
        return kept

    def _work(self) -> None:
        try:
            wait_s: float | None = None
            while self._await_turn(wait_s):
                wait_s = self._recorder.attempt()
                with self._turn:
                    self._turn.notify_all()
                if self._end is not None and wait_s is None:
                    wait_s = self._recorder.end(*self._end)
                    self._ended = wait_s is None
        except BaseException as error:
            self._dead = True
            self._recorder.dead(error)
            raise
        finally:
            self._store.close()
            if self._lock is not None:
                self._lock.release()
            with self._turn:
                self._turn.notify_all()

    def _await_turn(self, wait_s: float | None) -> bool:
        """Wait for something to do, or `wait_s` after a failure; False when there is nothing left to do at all."""
        with self._turn:
            if self._end is None and wait_s is None:
                self._turn.wait_for(lambda: self._end is not None or not self._backlog.empty)
            elif self._end is None:
                self._turn.wait_for(lambda: self._end is not None, wait_s)
            elif wait_s:
                self._turn.wait(max(0.0, min(wait_s, self._give_up_s - time.monotonic())))
            return not self._ended and not (self._end is not None and wait_s and time.monotonic() >= self._give_up_s)
