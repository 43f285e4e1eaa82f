"""What waits to be written: a bounded queue that knows what it may drop, and counts what it did.

Overflow rule. The queue holds at most `capacity` records, those now being written included.

* A period that finds the queue full is lost; it is the samples that give way.
* An event or an outcome that finds the queue full takes the place of the oldest waiting period. Only when no period
  waits, that is when the queue is full of events, is the event itself lost.

Nothing waits, nothing blocks, whatever the disk does. Every loss is counted, merged with others of the same sort and
cause, and handed out with the next batch, so that the journal itself tells what it lacks.

Records are handed out by `peek` and leave the queue by `done` only, when they are on the disk; `keep` leaves them in
place after a failed attempt. One caller at a time peeks; any thread may put.
"""

from __future__ import annotations

import threading
from collections import deque
from dataclasses import dataclass
from enum import StrEnum

import msgspec

from gateway.journal.records import Event, Loss, Outcome, PeriodRecord

Note = Event | Outcome
"""What is never dropped before samples."""


class Fate(StrEnum):
    """What became of a record that was put."""

    QUEUED = "queued"
    DISPLACED = "displaced"
    """Queued, at the price of the oldest period that waited."""
    LOST = "lost"


@dataclass(frozen=True)
class Batch:
    """What is to be written in one transaction, oldest first."""

    periods: tuple[PeriodRecord, ...] = ()
    notes: tuple[Note, ...] = ()
    losses: tuple[Loss, ...] = ()

    def __len__(self) -> int:
        return len(self.periods) + len(self.notes) + len(self.losses)


class Backlog:
    """The bounded queue; see the overflow rule above.

    Args:
        capacity: most records held, at least 2.
    """

    def __init__(self, capacity: int) -> None:
        if capacity < 2:
            raise ValueError(f"capacity = {capacity}: a backlog holds at least 2 records; the default is 1200")
        self.capacity = capacity
        self._lock = threading.Lock()
        self._periods: deque[PeriodRecord] = deque()
        self._notes: deque[Note] = deque()
        self._losses: dict[tuple[str, str], Loss] = {}
        self._peeked = Batch()
        self._lost_periods = 0
        self._lost_notes = 0

    def __len__(self) -> int:
        """Records waiting or being written; losses not yet told do not count."""
        with self._lock:
            return self._depth()

    @property
    def empty(self) -> bool:
        """Whether nothing is left to write, no loss either."""
        with self._lock:
            return self._depth() == 0 and not self._losses and not self._peeked.losses

    @property
    def lost(self) -> tuple[int, int]:
        """Periods and notes lost since the start."""
        with self._lock:
            return self._lost_periods, self._lost_notes

    def put_period(self, record: PeriodRecord) -> Fate:
        """Queue a period, or count it as lost."""
        with self._lock:
            if self._depth() >= self.capacity:
                self._lose(record, "the queue was full")
                return Fate.LOST
            self._periods.append(record)
            return Fate.QUEUED

    def put_note(self, note: Note) -> Fate:
        """Queue an event or an outcome, if need be in place of the oldest period that waits."""
        with self._lock:
            fate = Fate.QUEUED
            if self._depth() >= self.capacity:
                writing = len(self._peeked.periods)
                if len(self._periods) == writing:
                    self._lose(note, "the queue was full of events")
                    return Fate.LOST
                self._lose(self._periods[writing], "gave way to an event")
                del self._periods[writing]
                fate = Fate.DISPLACED
            self._notes.append(note)
            return fate

    def lose(self, record: PeriodRecord | Note, cause: str) -> None:
        """Count a record as lost that could not be written for a reason of its own."""
        with self._lock:
            self._lose(record, cause)

    def peek(self, limit: int) -> Batch:
        """Hand out up to `limit` periods and `limit` notes, and all losses; they stay until `done` or `keep`."""
        with self._lock:
            self._peeked = Batch(
                tuple(self._periods[index] for index in range(min(limit, len(self._periods)))),
                tuple(self._notes[index] for index in range(min(limit, len(self._notes)))),
                tuple(self._losses.values()),
            )
            self._losses = {}
            return self._peeked

    def done(self) -> None:
        """What was peeked is on the disk: let go of it."""
        with self._lock:
            for _ in self._peeked.periods:
                self._periods.popleft()
            for _ in self._peeked.notes:
                self._notes.popleft()
            self._peeked = Batch()

    def keep(self) -> None:
        """What was peeked could not be written: it stays, and is handed out again."""
        with self._lock:
            since, self._losses = self._losses, {}
            for loss in (*self._peeked.losses, *since.values()):
                self._merge(loss)
            self._peeked = Batch()

    def _depth(self) -> int:
        return len(self._periods) + len(self._notes)

    def _lose(self, record: PeriodRecord | Note, cause: str) -> None:
        if isinstance(record, PeriodRecord):
            self._lost_periods += 1
            what, wall_ns = "period", record.due_ns
        else:
            self._lost_notes += 1
            what, wall_ns = ("event" if isinstance(record, Event) else "outcome"), record.wall_ns
        k = record.k
        self._merge(
            Loss(what=what, cause=cause, count=1, first_k=k, last_k=k, first_ns=wall_ns, last_ns=wall_ns),
        )

    def _merge(self, loss: Loss) -> None:
        before = self._losses.get((loss.what, loss.cause))
        if before is not None:
            ks = [k for k in (before.first_k, before.last_k, loss.first_k, loss.last_k) if k is not None]
            loss = msgspec.structs.replace(
                before,
                count=before.count + loss.count,
                first_k=min(ks, default=None),
                last_k=max(ks, default=None),
                first_ns=min(before.first_ns, loss.first_ns),
                last_ns=max(before.last_ns, loss.last_ns),
            )
        self._losses[loss.what, loss.cause] = loss
