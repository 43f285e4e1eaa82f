"""Tests of `gateway.worker`: in time or not at all, and one job at a time."""

from __future__ import annotations

import asyncio
import threading
from collections.abc import AsyncIterator, Callable
from dataclasses import dataclass, field

import numpy as np
import pytest

from controllers import Measured, NotFiniteError, Outcome
from gateway.clock import NS, RealClock, VirtualClock
from gateway.design import PlantDesign
from gateway.worker import InlineWorker, Job, Solved, ThreadWorker


def rest(design: PlantDesign) -> Measured:
    """A plant at its operating point."""
    net = design.network
    return Measured(np.zeros(net.a.shape[0]), np.zeros(net.e.shape[1]), np.zeros(net.b.shape[1]))


@pytest.fixture
def job(tarn_row: PlantDesign) -> Job:
    """One easy job."""
    return Job(tarn_row.synthesis, rest(tarn_row), tarn_row.synthesis.data(), None)


@dataclass(frozen=True)
class Gated(Job):
    """A job that starts solving when it is let, so that a test decides what is late."""

    gate: threading.Event = field(default_factory=threading.Event)
    started: threading.Event = field(default_factory=threading.Event)

    def solve(self, may_continue: Callable[[int], bool]) -> Solved:
        """Wait, then solve."""
        self.started.set()
        self.gate.wait()
        return super().solve(may_continue)

    @classmethod
    def of(cls, job: Job) -> Gated:
        """Gate a job."""
        return cls(job.synthesis, job.measured, job.data, job.before)


@pytest.fixture
async def threaded() -> AsyncIterator[tuple[ThreadWorker, VirtualClock]]:
    """A worker with its thread, and the clock that tells it what is late."""
    clock = VirtualClock(7)
    worker = ThreadWorker(clock)
    yield worker, clock
    worker.close()


async def until(condition: Callable[[], bool]) -> None:
    """Let the loop turn until a thread has done its part."""
    async with asyncio.timeout(30):
        while not condition():  # noqa: ASYNC110 - a thread sets no asyncio.Event
            await asyncio.sleep(0.001)


async def test_a_solve_in_time_is_handed_over(job: Job, threaded: tuple[ThreadWorker, VirtualClock]) -> None:
    """The thread's result is the one the numerics give."""
    worker, clock = threaded
    solved = await worker.solve(job, clock.monotonic_ns() + 1, clock.monotonic_ns() + 2)
    assert solved is not None
    expected, _ = job.solve(lambda _: True)
    assert solved[0].outcome is Outcome.CONVERGED
    assert (solved[0].inputs == expected.inputs).all()


async def test_the_kernels_are_told_to_stop(job: Job, threaded: tuple[ThreadWorker, VirtualClock]) -> None:
    """Past its stop instant a solve ends at its next look at the clock, with the best it has."""
    worker, clock = threaded
    hard = Job(job.synthesis, Measured(job.measured.x + 1.0, job.measured.w, job.measured.u_before), job.data, None)
    solved = await worker.solve(hard, clock.monotonic_ns(), clock.monotonic_ns() + 10**9)
    assert solved is not None
    assert solved[0].outcome is Outcome.OUT_OF_TIME
    assert solved[0].iterations == job.synthesis.settings.chunk


async def test_a_late_result_is_thrown_away(job: Job, threaded: tuple[ThreadWorker, VirtualClock]) -> None:
    """None at the due instant, though the thread still works; what it yields later is nobody's."""
    worker, clock = threaded
    late = Gated.of(job)
    due_ns = clock.monotonic_ns() + 10
    waiting = asyncio.ensure_future(worker.solve(late, due_ns, due_ns))
    await until(late.started.is_set)
    clock.advance_to(due_ns)
    assert await waiting is None
    late.gate.set()


async def test_while_the_thread_is_taken_every_period_is_late(
    job: Job, threaded: tuple[ThreadWorker, VirtualClock]
) -> None:
    """The next job is never started, and its answer comes at its due instant, not before."""
    worker, clock = threaded
    late, following = Gated.of(job), Gated.of(job)
    due_ns = clock.monotonic_ns() + 10
    first = asyncio.ensure_future(worker.solve(late, due_ns, due_ns))
    await until(late.started.is_set)
    clock.advance_to(due_ns)
    assert await first is None
    second = asyncio.ensure_future(worker.solve(following, due_ns + 10, due_ns + 10))
    await asyncio.sleep(0)
    assert not second.done()
    clock.advance_to(due_ns + 10)
    assert await second is None
    late.gate.set()
    await until(lambda: not worker.taken)
    assert not following.started.is_set()


async def test_once_the_thread_is_free_it_solves_what_is_asked_then(
    job: Job, threaded: tuple[ThreadWorker, VirtualClock]
) -> None:
    """Not what was asked before."""
    worker, clock = threaded
    late = Gated.of(job)
    due_ns = clock.monotonic_ns() + 10
    first = asyncio.ensure_future(worker.solve(late, due_ns, due_ns))
    await until(late.started.is_set)
    clock.advance_to(due_ns)
    assert await first is None
    late.gate.set()
    await until(lambda: not worker.taken)
    moved = Job(job.synthesis, Measured(job.measured.x + 0.01, job.measured.w, job.measured.u_before), job.data, None)
    expected, _ = moved.solve(lambda _: True)
    solved = await worker.solve(moved, due_ns + 10, due_ns + 10)
    assert solved is not None
    assert (solved[0].inputs == expected.inputs).all()


async def test_an_error_of_the_numerics_reaches_whoever_asked(
    job: Job, tarn_row: PlantDesign, threaded: tuple[ThreadWorker, VirtualClock]
) -> None:
    """Misuse in the thread is misuse here."""
    worker, clock = threaded
    bad = Job(job.synthesis, Measured(job.measured.x * np.nan, job.measured.w, job.measured.u_before), job.data, None)
    with pytest.raises(NotFiniteError, match="state of section 'tank-1' is nan"):
        await worker.solve(bad, clock.monotonic_ns() + 1, clock.monotonic_ns() + 2)


async def test_a_cancelled_solve_leaves_no_sleeper(job: Job, threaded: tuple[ThreadWorker, VirtualClock]) -> None:
    """The alarm goes with whoever set it; the thread ends by itself."""
    worker, clock = threaded
    late = Gated.of(job)
    waiting = asyncio.ensure_future(worker.solve(late, clock.monotonic_ns() + 5, clock.monotonic_ns() + 10))
    await until(late.started.is_set)
    waiting.cancel()
    with pytest.raises(asyncio.CancelledError):
        await waiting
    await asyncio.sleep(0)
    assert clock.next_ns() is None
    late.gate.set()


async def test_a_closed_worker_takes_no_more_jobs(job: Job) -> None:
    """Its thread is let go."""
    clock = VirtualClock(7)
    worker = ThreadWorker(clock)
    worker.close()
    with pytest.raises(RuntimeError, match="after shutdown"):
        await worker.solve(job, clock.monotonic_ns() + 1, clock.monotonic_ns() + 2)


async def test_inline_solves_on_the_spot_whatever_the_instants(job: Job) -> None:
    """Virtual time counts passes, not microseconds."""
    solved = await InlineWorker().solve(job, 0, 0)
    assert solved is not None
    assert solved[0].outcome is Outcome.CONVERGED


async def test_inline_is_late_as_often_as_was_rehearsed(job: Job) -> None:
    """And in time again afterwards."""
    worker = InlineWorker()
    worker.provoke_slow(2)
    answers = [await worker.solve(job, 0, 0) for _ in range(3)]
    assert [answer is None for answer in answers] == [True, True, False]
    worker.close()


@pytest.mark.real_time
async def test_a_thread_is_late_when_that_was_rehearsed(job: Job) -> None:
    """It really sleeps past the due instant, which is far off for so small a job."""
    clock = RealClock()
    worker = ThreadWorker(clock)
    worker.provoke_slow(1)
    due_ns = clock.monotonic_ns() + 300_000_000
    assert await worker.solve(job, due_ns, due_ns) is None
    await until(lambda: not worker.taken)
    due_ns = clock.monotonic_ns() + 60 * NS
    assert await worker.solve(job, due_ns, due_ns) is not None
    worker.close()
