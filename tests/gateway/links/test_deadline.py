"""Waiting in time, whatever the awaited does."""

from __future__ import annotations

import asyncio

import pytest

from gateway.clock import NS, VirtualClock
from gateway.links.deadline import CallBrokenError, DeadlineMissedError, first_of, result_by, within


@pytest.fixture
def clock() -> VirtualClock:
    """Give a clock that stands still."""
    return VirtualClock(seed=3)


async def turn() -> None:
    """Let every ready task run."""
    for _ in range(5):
        await asyncio.sleep(0)


async def test_work_in_time_gives_its_result(clock: VirtualClock) -> None:
    """No deadline is felt by work that meets it."""

    async def work() -> int:
        await asyncio.sleep(0)
        return 7

    assert await within(clock, clock.monotonic_ns() + NS, work()) == 7
    assert clock.next_ns() is None


async def test_work_that_raises_raises(clock: VirtualClock) -> None:
    """Its own exception comes through unchanged."""

    async def work() -> None:
        raise KeyError("x")

    with pytest.raises(KeyError):
        await within(clock, clock.monotonic_ns() + NS, work())


async def test_late_work_is_cancelled(clock: VirtualClock) -> None:
    """At its instant the work is told to stop and the caller goes on."""
    stopped = asyncio.Event()

    async def work() -> None:
        try:
            await asyncio.Event().wait()
        finally:
            stopped.set()

    waiting = asyncio.ensure_future(within(clock, clock.monotonic_ns() + NS, work()))
    await turn()
    assert not waiting.done()
    clock.advance_to(clock.monotonic_ns() + NS)
    with pytest.raises(DeadlineMissedError):
        await waiting
    await stopped.wait()


async def test_work_that_will_not_stop_is_left_behind(clock: VirtualClock) -> None:
    """A library that swallows cancellation delays nobody, and what it raises later is heard by nobody."""
    release = asyncio.Event()
    ended = asyncio.Event()

    async def stubborn() -> None:
        try:
            await asyncio.Event().wait()
        except asyncio.CancelledError:
            await release.wait()
            ended.set()
            raise RuntimeError("too late to matter") from None

    waiting = asyncio.ensure_future(within(clock, clock.monotonic_ns() + NS, stubborn()))
    await turn()
    clock.advance_to(clock.monotonic_ns() + NS)
    with pytest.raises(DeadlineMissedError):
        await waiting
    release.set()
    await ended.wait()
    await turn()


async def test_cancelling_the_caller_cancels_the_work(clock: VirtualClock) -> None:
    """Nothing goes on for a caller who has gone; no sleeper stays on the clock."""
    stopped = asyncio.Event()

    async def work() -> None:
        try:
            await asyncio.Event().wait()
        finally:
            stopped.set()

    waiting = asyncio.ensure_future(within(clock, clock.monotonic_ns() + NS, work()))
    await turn()
    waiting.cancel()
    with pytest.raises(asyncio.CancelledError):
        await waiting
    await stopped.wait()
    await turn()
    assert clock.next_ns() is None


async def test_work_cancelled_by_somebody_else_is_broken_not_cancelled(clock: VirtualClock) -> None:
    """A stray CancelledError from a library must not look like our own shutdown (row 21)."""

    async def work() -> None:
        raise asyncio.CancelledError

    with pytest.raises(CallBrokenError):
        await within(clock, clock.monotonic_ns() + NS, work())


async def test_a_shared_result_survives_a_missed_deadline(clock: VirtualClock) -> None:
    """`result_by` stops waiting without stopping the work."""
    work: asyncio.Future[int] = asyncio.get_running_loop().create_future()
    waiting = asyncio.ensure_future(result_by(clock, clock.monotonic_ns() + NS, work))
    await turn()
    clock.advance_to(clock.monotonic_ns() + NS)
    with pytest.raises(DeadlineMissedError):
        await waiting
    work.set_result(3)
    assert await result_by(clock, clock.monotonic_ns() + NS, work) == 3


async def test_the_first_of_several_ends_the_wait(clock: VirtualClock) -> None:
    """Any of the awaited will do, and the others are left alone."""
    one: asyncio.Future[int] = asyncio.get_running_loop().create_future()
    other: asyncio.Future[int] = asyncio.get_running_loop().create_future()
    waiting = asyncio.ensure_future(first_of(clock, clock.monotonic_ns() + NS, one, other))
    await turn()
    other.set_result(1)
    await waiting
    assert not one.done()
