"""Where the synthesis runs: beside the event loop, never in its way, and never longer than it may.

`ThreadWorker` solves in one thread while the kernels leave the interpreter lock alone. A solve that misses its instant
keeps the thread until it ends; its result is thrown away, never used a period late, and meanwhile every further period
is late too. `InlineWorker` solves on the spot for virtual time, where passes are counted instead of microseconds.
"""

from __future__ import annotations

import asyncio
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import Protocol

from controllers import Design, Iterate, Measured, Plan, RowData
from gateway.clock import NS, Clock


@dataclass(frozen=True)
class Job:
    """One period's synthesis."""

    synthesis: Design
    measured: Measured
    data: RowData
    before: Iterate | None

    def solve(self, may_continue: Callable[[int], bool]) -> tuple[Plan, Iterate]:
        """Run it."""
        return self.synthesis.solve(self.measured, self.data, self.before, may_continue=may_continue)


Solved = tuple[Plan, Iterate]


class Worker(Protocol):
    """Solves one job at a time."""

    async def solve(self, job: Job, stop_ns: int, due_ns: int) -> Solved | None:
        """Solve until `stop_ns` at most; None when there is no result by `due_ns`."""

    def provoke_slow(self, periods: int) -> None:
        """Rehearsal: let the next solves miss their instant."""

    def close(self) -> None:
        """Let go of the thread."""


class ThreadWorker:
    """Solves in a thread of its own, real time."""

    def __init__(self, clock: Clock) -> None:
        self._clock = clock
        self._pool = ThreadPoolExecutor(max_workers=1, thread_name_prefix="synthesis")
        self._busy: asyncio.Future[Solved] | None = None
        self._slow = 0

    @property
    def taken(self) -> bool:
        """Whether the thread still works on a job, late or not."""
        return self._busy is not None and not self._busy.done()

    async def solve(self, job: Job, stop_ns: int, due_ns: int) -> Solved | None:
        """Solve until `stop_ns` at most; None when there is no result by `due_ns` or the thread is still taken."""
        if self.taken:
            await self._clock.sleep_until(due_ns)
            return None
        slow, self._slow = self._slow > 0, max(0, self._slow - 1)
        clock = self._clock

        def work() -> Solved:
            if slow:
                time.sleep(max(0, due_ns - clock.monotonic_ns()) / NS + 0.02)
            return job.solve(lambda _: clock.monotonic_ns() < stop_ns)

        future = asyncio.get_running_loop().run_in_executor(self._pool, work)
        self._busy = future
        alarm = asyncio.ensure_future(clock.sleep_until(due_ns))
        race: set[asyncio.Future[Solved] | asyncio.Future[None]] = {future, alarm}
        try:
            await asyncio.wait(race, return_when=asyncio.FIRST_COMPLETED)
        finally:
            alarm.cancel()
        return future.result() if future.done() else None

    def provoke_slow(self, periods: int) -> None:
        """Let the next solves sleep past their instant."""
        self._slow = periods

    def close(self) -> None:
        """Do not wait for a solve that is still running."""
        self._pool.shutdown(wait=False, cancel_futures=True)


class InlineWorker:
    """Solves on the spot: for virtual time. The budget is `max_iterations` of the design."""

    def __init__(self) -> None:
        self._slow = 0

    async def solve(self, job: Job, stop_ns: int, due_ns: int) -> Solved | None:
        """Solve at once, whatever the instants; None when a slow solve was provoked."""
        if self._slow > 0:
            self._slow -= 1
            return None
        return job.solve(lambda _: True)

    def provoke_slow(self, periods: int) -> None:
        """Answer the next jobs with nothing."""
        self._slow = periods

    def close(self) -> None:
        """Nothing to let go of."""
