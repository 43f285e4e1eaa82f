"""Control's side of the requests: a thread that fetches and answers, and a bounded inbox between it and the period.

Overflow rule: at most `INBOX` requests are claimed and unanswered. Further ones stay in the file, unclaimed, until
there is room, and are void after 10 s; whoever asked is told. Of refusals that wait to be journaled the newest 320 are
kept, should no period take them; the file has them all.

`take` and `answer` are for the period: they touch no file and wait for nothing. A failing file is told once and tried
again with growing pauses; answers wait in memory meanwhile, at most one per claimed request.
"""

from __future__ import annotations

import threading
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import apsw

from gateway import sentences
from gateway.journal.database import open_to_write
from gateway.journal.exceptions import StorageUnwritableError
from gateway.journal.lock import WriterLock
from gateway.journal.recorder import retry_s
from gateway.journal.records import Outcome
from gateway.plantfile.plant import Plant
from gateway.requests import file
from gateway.requests.file import REQUESTS, Reply, RequestState, Row, void_reason
from gateway.requests.words import Request, RequestError, parse_request

INBOX = 32
POLL_S = 0.1


@dataclass(frozen=True)
class Asked:
    """One request that awaits control's answer."""

    number: int
    asked_ns: int
    who: str
    words: str
    request: Request


@dataclass(frozen=True)
class Taken:
    """What a period finds at its start.

    Attributes:
        asked: to be applied or refused, each answered by `RequestDesk.answer`.
        refused: requests that were void or unreadable, answered already; to be journaled.
    """

    asked: tuple[Asked, ...] = ()
    refused: tuple[Outcome, ...] = ()


@dataclass(frozen=True)
class DeskStatistics:
    """Snapshot of the desk's counters since it was opened."""

    taken: int
    answered: int
    refused_unseen: int
    failures: int
    alive: bool


class RequestDesk:
    """One run taking requests; made by `open`, which starts the thread. `step` is what the thread repeats.

    Args:
        connection: to the file of requests.
        plant: what requests are read against.
        run: id of this run.
        wall_ns: now, Unix nanoseconds.
        tell: told when the file fails and when it works again, by the desk's thread: quick, thread-safe, never raising.
    """

    def __init__(
        self,
        connection: apsw.Connection,
        plant: Plant,
        run: str,
        *,
        wall_ns: Callable[[], int],
        tell: Callable[[sentences.Notice], None],
    ) -> None:
        self._connection = connection
        self._plant = plant
        self._run = run
        self._wall_ns = wall_ns
        self._tell = tell
        self._lock = threading.Lock()
        self._inbox: deque[Asked] = deque()
        self._refused: deque[Outcome] = deque(maxlen=10 * INBOX)
        self._replies: deque[Reply] = deque()
        self._unanswered = 0
        self._counts = {"taken": 0, "answered": 0, "refused": 0, "failures": 0}
        self._failures_in_a_row = 0
        self._closing = threading.Event()
        self._finished = False
        self._thread: threading.Thread | None = None
        self._file_lock: WriterLock | None = None
        file.open_desk(connection, run, plant.name, wall_ns())

    @classmethod
    def open(
        cls,
        path: Path,
        plant: Plant,
        run: str,
        *,
        wall_ns: Callable[[], int],
        tell: Callable[[sentences.Notice], None],
        poll_s: float = POLL_S,
    ) -> RequestDesk:
        """Create or check the file, say that this run takes requests, and start the thread.

        Raises:
            StorageBusyError: another process takes requests from this file.
            StorageForeignError, StorageVersionError: the file is not one we may write.
            StorageUnwritableError: it cannot be written.
        """
        lock = WriterLock(path)
        try:
            opened = open_to_write(path, REQUESTS, wall_ns())
            desk = cls(opened.connection, plant, run, wall_ns=wall_ns, tell=tell)
        except apsw.Error as error:
            lock.release()
            raise StorageUnwritableError(f"the file of requests at {path} cannot be written: {error}") from error
        except BaseException:
            lock.release()
            raise
        desk._file_lock = lock
        if opened.aside is not None:
            tell(sentences.moved_aside(REQUESTS.noun, opened.aside.name))
        desk._thread = threading.Thread(target=desk._work, args=(poll_s,), name="requests", daemon=True)
        desk._thread.start()
        return desk

    def take(self, now_ns: int) -> Taken:
        """What was asked since the last period. Never blocks.

        Args:
            now_ns: now, Unix nanoseconds: a request that became void while it waited is refused here.
        """
        with self._lock:
            asked = tuple(self._inbox)
            self._inbox.clear()
            refused = list(self._refused)
            self._refused.clear()
        good = []
        for one in asked:
            reason = void_reason(one.asked_ns, self._run, self._run, now_ns)
            if reason is None:
                good.append(one)
            else:
                refused.append(self.answer(one, RequestState.REFUSED, reason, now_ns, None))
        return Taken(tuple(good), tuple(refused))

    def answer(self, asked: Asked, state: RequestState, reason: str, now_ns: int, k: int | None) -> Outcome:
        """Hand control's answer to the desk, which writes it to the file soon. Never blocks.

        Returns:
            The same answer for the journal.
        """
        with self._lock:
            self._replies.append(Reply(asked.number, state, reason, now_ns, k))
            self._counts["answered"] += 1
        return _outcome(asked, state, reason, now_ns, k)

    def step(self) -> float:
        """Write the answers that wait, then claim what was asked; return seconds to pause beyond the usual."""
        try:
            self._write_replies()
            self._fetch()
        except apsw.Error as error:
            self._counts["failures"] += 1
            self._failures_in_a_row += 1
            if self._failures_in_a_row == 1:
                self._tell(sentences.requests_failing(f"{type(error).__name__}: {error}"))
            return retry_s(self._failures_in_a_row)
        if self._failures_in_a_row:
            self._failures_in_a_row = 0
            self._tell(sentences.requests_recovered())
        return 0.0

    def close(self, timeout_s: float = 5.0) -> None:
        """Write the last answers, refuse what is left, and stop the thread; safe to call twice."""
        self._closing.set()
        if self._thread is not None:
            self._thread.join(timeout_s)
        else:
            self._finish()

    def statistics(self) -> DeskStatistics:
        """Counters so far."""
        return DeskStatistics(
            taken=self._counts["taken"],
            answered=self._counts["answered"],
            refused_unseen=self._counts["refused"],
            failures=self._counts["failures"],
            alive=self._thread is not None and self._thread.is_alive(),
        )

    def _write_replies(self) -> None:
        with self._lock:
            waiting = list(self._replies)
        if not waiting:
            return
        file.reply(self._connection, waiting)
        with self._lock:
            for _ in waiting:
                self._replies.popleft()
            self._unanswered -= len(waiting)

    def _fetch(self) -> None:
        for row in file.unclaimed(self._connection, self._run, INBOX):
            now_ns = self._wall_ns()
            request, reason = self._read(row, now_ns)
            if request is None:
                file.reply(self._connection, [Reply(row.number, RequestState.REFUSED, reason, now_ns, None)])
                with self._lock:
                    self._refused.append(_outcome(row, RequestState.REFUSED, reason, now_ns, None))
                self._counts["refused"] += 1
            elif self._unanswered < INBOX and file.claim(self._connection, row.number, now_ns):
                with self._lock:
                    self._inbox.append(Asked(row.number, row.asked_ns, row.who, row.words, request))
                    self._unanswered += 1
                self._counts["taken"] += 1

    def _read(self, row: Row, now_ns: int) -> tuple[Request | None, str]:
        reason = void_reason(row.asked_ns, row.run, self._run, now_ns)
        if reason is not None:
            return None, reason
        try:
            return parse_request(row.words, self._plant), ""
        except RequestError as error:
            return None, str(error)

    def _work(self, poll_s: float) -> None:
        try:
            pause_s = 0.0
            while not self._closing.wait(poll_s + pause_s):
                pause_s = self.step()
        except BaseException as error:
            self._tell(sentences.requests_dead(f"{type(error).__name__}: {error}"))
            raise
        finally:
            self._finish()

    def _finish(self) -> None:
        if self._finished:
            return
        self._finished = True
        try:
            self._write_replies()
            file.close_desk(self._connection, self._run, self._wall_ns())
        except apsw.Error as error:
            # The next run refuses what is left, as addressed to this one.
            self._tell(sentences.requests_failing(f"{type(error).__name__}: {error}"))
        finally:
            self._connection.close()
            if self._file_lock is not None:
                self._file_lock.release()


def _outcome(asked: Asked | Row, state: RequestState, reason: str, wall_ns: int, k: int | None) -> Outcome:
    return Outcome(
        wall_ns=wall_ns,
        request=asked.number,
        asked_ns=asked.asked_ns,
        who=asked.who,
        words=asked.words,
        state=str(state),
        reason=reason,
        k=k,
    )
