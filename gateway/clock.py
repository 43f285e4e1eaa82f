"""The one injected clock: two time scales, one way to wait.

`monotonic_ns` steers everything; `wall_ns` only labels and aligns. Neither is ever derived from the other after start,
so a stepped wall clock cannot move a period.

Period instants (runtime, section 2), with Ts the period and all times in nanoseconds:

    origin = monotonic − wall                      both read once, at start
    due(k) = origin + k Ts                         k counts periods of the Unix epoch: the same k on every host
    k0     = ceil((wall + lead) / Ts)              the first period driven
"""

from __future__ import annotations

import asyncio
import heapq
import itertools
import random
import time
from dataclasses import dataclass
from typing import Protocol

NS = 1_000_000_000


class Clock(Protocol):
    """What every room that needs time is given."""

    def monotonic_ns(self) -> int:
        """Nanoseconds that never step; their zero means nothing."""

    def wall_ns(self) -> int:
        """Unix nanoseconds, for labels only: they may step."""

    async def sleep_until(self, instant_ns: int) -> None:
        """Return at or just after this monotonic instant; at once (after one turn of the loop) when it has passed."""


class RealClock:
    """The host's clocks."""

    def monotonic_ns(self) -> int:
        """Nanoseconds of the host's monotonic clock."""
        return time.monotonic_ns()

    def wall_ns(self) -> int:
        """Unix nanoseconds of the host's wall clock."""
        return time.time_ns()

    async def sleep_until(self, instant_ns: int) -> None:
        """Sleep on the event loop; its timers are late by about a millisecond, never early here."""
        while (left := instant_ns - time.monotonic_ns()) > 0:  # noqa: ASYNC110 - it is the time itself that is awaited
            await asyncio.sleep(left / NS)
        await asyncio.sleep(0)


class VirtualClock:
    """Time that moves only when it is told to, or when everybody waits for it.

    Both origins are random, so that code mixing two clocks fails loudly. `advance` wakes sleepers in order of their
    instants.
    """

    def __init__(self, seed: int = 0) -> None:
        rng = random.Random(seed)
        self._now_ns = rng.randrange(10**14)
        self._wall_offset_ns = rng.randrange(10**18, 2 * 10**18)
        self._sleepers: list[tuple[int, int, asyncio.Future[None]]] = []
        self._order = itertools.count()

    def monotonic_ns(self) -> int:
        """Virtual monotonic nanoseconds."""
        return self._now_ns

    def wall_ns(self) -> int:
        """Virtual Unix nanoseconds."""
        return self._now_ns + self._wall_offset_ns

    def step_wall(self, by_ns: int) -> None:
        """Step the wall clock alone, as an administrator or a time server would."""
        self._wall_offset_ns += by_ns

    async def sleep_until(self, instant_ns: int) -> None:
        """Wait until `advance` has moved time to the instant."""
        if instant_ns <= self._now_ns:
            await asyncio.sleep(0)
            return
        future: asyncio.Future[None] = asyncio.get_running_loop().create_future()
        heapq.heappush(self._sleepers, (instant_ns, next(self._order), future))
        await future

    def next_ns(self) -> int | None:
        """Instant of the earliest sleeper, None when nobody sleeps."""
        while self._sleepers and self._sleepers[0][2].done():
            heapq.heappop(self._sleepers)
        return self._sleepers[0][0] if self._sleepers else None

    def advance_to(self, instant_ns: int) -> None:
        """Move time forward, waking those who waited for it.

        Raises:
            ValueError: the instant lies in the past.
        """
        if instant_ns < self._now_ns:
            raise ValueError(f"cannot advance to {instant_ns} ns: virtual time is already {self._now_ns} ns")
        while (due := self.next_ns()) is not None and due <= instant_ns:
            self._now_ns = due
            heapq.heappop(self._sleepers)[2].set_result(None)
        self._now_ns = instant_ns

    def spend(self, duration_ns: int) -> None:
        """Pretend that work took this long, without waking anybody before the next `advance_to`."""
        self._now_ns += duration_ns


@dataclass(frozen=True)
class Schedule:
    """Absolute instants of the periods, `due(k) = origin + k Ts`, monotonic nanoseconds."""

    origin_ns: int
    period_ns: int

    @classmethod
    def aligned(cls, clock: Clock, period_ns: int, lead_ns: int) -> tuple[Schedule, int]:
        """Return a schedule whose k counts periods of the Unix epoch, and the first k at least `lead_ns` ahead."""
        wall, monotonic = clock.wall_ns(), clock.monotonic_ns()
        first = -(-(wall + lead_ns) // period_ns)
        return cls(origin_ns=monotonic - wall, period_ns=period_ns), first

    def due_ns(self, k: int) -> int:
        """Monotonic instant at which period k starts."""
        return self.origin_ns + k * self.period_ns

    def current(self, monotonic_ns: int) -> int:
        """Index of the period that contains this instant."""
        return (monotonic_ns - self.origin_ns) // self.period_ns


class WallStepWatch:
    """Notices steps of the wall clock: its distance from the monotonic clock is constant unless somebody moved it."""

    def __init__(self, clock: Clock, tolerance_ns: int = 50_000_000) -> None:
        self._clock = clock
        self._tolerance_ns = tolerance_ns
        self._distance_ns = clock.wall_ns() - clock.monotonic_ns()

    def step_ns(self) -> int:
        """Size of the step since the last call, 0 when below the tolerance (slow slewing is followed silently)."""
        distance = self._clock.wall_ns() - self._clock.monotonic_ns()
        step = distance - self._distance_ns
        self._distance_ns = distance
        return step if abs(step) >= self._tolerance_ns else 0
