"""Tests of `gateway.clock`: virtual time, period instants, and steps of the wall clock."""

from __future__ import annotations

import asyncio

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.clock import NS, RealClock, Schedule, VirtualClock, WallStepWatch

MS = 1_000_000
PERIODS_NS = st.integers(20 * MS, 10 * NS)


async def turns(count: int = 5) -> None:
    """Let everything that can run do so."""
    for _ in range(count):
        await asyncio.sleep(0)


def test_virtual_time_stands_still() -> None:
    """Nothing but an order moves it."""
    clock = VirtualClock(1)
    assert clock.monotonic_ns() == clock.monotonic_ns()
    assert clock.wall_ns() == clock.wall_ns()


def test_the_two_clocks_of_a_virtual_clock_share_no_zero() -> None:
    """Code that takes one for the other is years away from the truth, whatever the seed."""
    for seed in range(20):
        clock = VirtualClock(seed)
        assert abs(clock.wall_ns() - clock.monotonic_ns()) > 20 * 365 * 86400 * NS


def test_a_seed_makes_the_origin_repeatable() -> None:
    """Same seed, same instants; another seed, others."""
    assert VirtualClock(4).monotonic_ns() == VirtualClock(4).monotonic_ns()
    assert VirtualClock(4).monotonic_ns() != VirtualClock(5).monotonic_ns()


@given(st.lists(st.integers(0, 10 * NS), max_size=6))
def test_both_clocks_move_together(moves: list[int]) -> None:
    """However time is moved, their distance stays."""
    clock = VirtualClock(2)
    distance = clock.wall_ns() - clock.monotonic_ns()
    for place, by in enumerate(moves):
        if place % 2:
            clock.spend(by)
        else:
            clock.advance_to(clock.monotonic_ns() + by)
    assert clock.wall_ns() - clock.monotonic_ns() == distance


def test_time_never_goes_back() -> None:
    """Advancing to the past is misuse, and says where time is."""
    clock = VirtualClock(1)
    with pytest.raises(ValueError, match=f"already {clock.monotonic_ns()} ns"):
        clock.advance_to(clock.monotonic_ns() - 1)


async def test_sleepers_wake_in_the_order_of_their_instants() -> None:
    """Those who wait longest wake last, each at the instant it asked for, and nobody early."""
    clock = VirtualClock(1)
    start = clock.monotonic_ns()
    woken: list[int] = []

    async def sleep(by: int) -> None:
        await clock.sleep_until(start + by)
        woken.append(by)

    sleepers = [asyncio.ensure_future(sleep(by)) for by in (30, 10, 20, 99)]
    await turns()
    assert clock.next_ns() == start + 10
    clock.advance_to(start + 30)
    await turns()
    assert woken == [10, 20, 30]
    sleepers[-1].cancel()


async def test_those_who_sleep_until_the_same_instant_wake_in_the_order_they_came() -> None:
    """Equal instants are no reason for disorder."""
    clock = VirtualClock(1)
    then = clock.monotonic_ns() + 10
    woken: list[int] = []

    async def sleep(number: int) -> None:
        await clock.sleep_until(then)
        woken.append(number)

    sleepers = [asyncio.ensure_future(sleep(number)) for number in range(5)]
    await turns()
    clock.advance_to(then)
    await asyncio.gather(*sleepers)
    assert woken == [0, 1, 2, 3, 4]


async def test_sleeping_until_the_past_returns_after_one_turn() -> None:
    """The loop gets its turn even when nobody has to wait."""
    clock = VirtualClock(1)
    others: list[str] = []
    asyncio.get_running_loop().call_soon(others.append, "had its turn")
    await clock.sleep_until(clock.monotonic_ns())
    assert others == ["had its turn"]


async def test_a_cancelled_sleeper_is_forgotten() -> None:
    """It neither wakes nor stops others from waking."""
    clock = VirtualClock(1)
    start = clock.monotonic_ns()
    gone = asyncio.ensure_future(clock.sleep_until(start + 10))
    other = asyncio.ensure_future(clock.sleep_until(start + 20))
    await turns()
    gone.cancel()
    await turns()
    assert clock.next_ns() == start + 20
    clock.advance_to(start + 20)
    await other
    assert gone.cancelled()
    assert clock.next_ns() is None


async def test_work_that_takes_time_wakes_nobody_before_it_is_over() -> None:
    """`spend` is what a busy processor looks like: sleepers are late."""
    clock = VirtualClock(1)
    start = clock.monotonic_ns()
    sleeper = asyncio.ensure_future(clock.sleep_until(start + 10))
    await turns()
    clock.spend(50)
    await turns()
    assert not sleeper.done()
    clock.advance_to(clock.monotonic_ns())
    await turns()
    assert sleeper.done()


async def test_late_sleepers_do_not_turn_time_back() -> None:
    """A sleeper whose instant was passed by work wakes at the present, not in the past."""
    clock = VirtualClock(1)
    start = clock.monotonic_ns()
    sleeper = asyncio.ensure_future(clock.sleep_until(start + 10))
    await turns()
    clock.spend(50)
    clock.advance_to(start + 60)
    await sleeper
    assert clock.monotonic_ns() == start + 60


async def test_the_real_clock_never_returns_early() -> None:
    """Whatever the host's timers do, the instant has come; and the past needs no waiting."""
    clock = RealClock()
    then = clock.monotonic_ns() + 2 * MS
    await clock.sleep_until(then)
    assert clock.monotonic_ns() >= then
    await clock.sleep_until(then)


@given(seed=st.integers(0, 10**6), period_ns=PERIODS_NS, k=st.integers(0, 10**9))
def test_instants_are_whole_periods_of_the_epoch(seed: int, period_ns: int, k: int) -> None:
    """due(k) = origin + k Ts, so that two hosts with the same wall clock agree on k though their uptimes differ."""
    one, other = VirtualClock(seed), VirtualClock(seed + 1)
    other.step_wall(one.wall_ns() - other.wall_ns())
    (first, k_one), (second, k_other) = (Schedule.aligned(clock, period_ns, 0) for clock in (one, other))
    assert k_one == k_other
    assert first.due_ns(k) - one.monotonic_ns() == second.due_ns(k) - other.monotonic_ns()
    assert first.due_ns(k) - first.due_ns(0) == k * period_ns


@given(seed=st.integers(0, 10**6), period_ns=PERIODS_NS, lead_ns=st.integers(0, NS))
def test_the_first_period_lies_just_far_enough_ahead(seed: int, period_ns: int, lead_ns: int) -> None:
    """At least the lead, and less than one period more."""
    clock = VirtualClock(seed)
    schedule, k = Schedule.aligned(clock, period_ns, lead_ns)
    assert lead_ns <= schedule.due_ns(k) - clock.monotonic_ns() < lead_ns + period_ns


@given(period_ns=PERIODS_NS, k=st.integers(0, 10**9), into=st.integers(0, 10**12))
def test_every_instant_belongs_to_one_period(period_ns: int, k: int, into: int) -> None:
    """From its due instant up to the next one, the latter excluded."""
    schedule = Schedule(origin_ns=-12345, period_ns=period_ns)
    assert schedule.current(schedule.due_ns(k) + into % period_ns) == k


def test_a_step_of_the_wall_clock_is_told_once_with_its_size() -> None:
    """Forwards and backwards; afterwards the new distance is the usual one."""
    clock = VirtualClock(1)
    watch = WallStepWatch(clock)
    clock.step_wall(3 * NS)
    assert watch.step_ns() == 3 * NS
    assert watch.step_ns() == 0
    clock.step_wall(-NS)
    assert watch.step_ns() == -NS


def test_passing_time_is_no_step() -> None:
    """Both clocks move, nobody is told."""
    clock = VirtualClock(1)
    watch = WallStepWatch(clock)
    clock.spend(3600 * NS)
    assert watch.step_ns() == 0


def test_slewing_is_followed_silently() -> None:
    """Many steps below the tolerance are what a time server does all day; they never add up to an alarm."""
    clock = VirtualClock(1)
    watch = WallStepWatch(clock, tolerance_ns=50 * MS)
    for _ in range(100):
        clock.step_wall(49 * MS)
        assert watch.step_ns() == 0
