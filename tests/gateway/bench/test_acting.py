"""The story acted in virtual time: every step at its time, and none kept from happening by one that failed."""

from __future__ import annotations

import asyncio
from collections.abc import Awaitable, Callable

import pytest

from gateway.bench.acting import Done, act
from gateway.bench.rehearsal import ProvokeError
from gateway.bench.story import Step
from gateway.clock import NS, VirtualClock
from gateway.journal import StorageMissingError
from gateway.requests import Answer, NobodyThereError, RequestError, RequestState

STEPS = (
    Step(0.0, "open", "It opens.", provoke=("set tank-1.consumer 8", "set tank-2.consumer 0")),
    Step(12.0, "ask", "Somebody asks.", ask="hold tank-1"),
    Step(30.0, "watch", "Nothing happens."),
)


class Stagehands:
    """What the plant and the gateway answer, and when each was spoken to."""

    def __init__(self, clock: VirtualClock, start_ns: int) -> None:
        self.calls: list[tuple[float, str]] = []
        self.provoke_error: Exception | None = None
        self.ask_error: Exception | None = None
        self.state = RequestState.APPLIED
        self.reason = ""
        self._clock = clock
        self._start_ns = start_ns

    async def provoke(self, line: str) -> str:
        """Be the simulated plant."""
        self._note(line)
        if self.provoke_error is not None:
            raise self.provoke_error
        return f"provoked: {line}"

    async def ask(self, words: str) -> Answer:
        """Be the gateway."""
        self._note(words)
        if self.ask_error is not None:
            raise self.ask_error
        return Answer(1, "run", self.state, self.reason, 7)

    def begins(self, step: Step) -> None:
        """Be told of a step."""
        self._note(step.name)

    def _note(self, what: str) -> None:
        self.calls.append(((self._clock.monotonic_ns() - self._start_ns) / NS, what))


async def acted(prepare: Callable[[Stagehands], object] = lambda _: None) -> tuple[list[Done], Stagehands]:
    """Act the steps, moving time from one sleeper to the next."""
    clock = VirtualClock(seed=3)
    hands = Stagehands(clock, clock.monotonic_ns())
    prepare(hands)

    async def collect() -> list[Done]:
        start_ns = clock.monotonic_ns()
        return [done async for done in act(STEPS, start_ns, clock, hands.provoke, hands.ask, hands.begins)]

    task = asyncio.ensure_future(collect())
    await _move(clock, task)
    return await task, hands


async def _move(clock: VirtualClock, task: Awaitable[object]) -> None:
    while not asyncio.ensure_future(task).done():
        await asyncio.sleep(0)
        if (due_ns := clock.next_ns()) is not None:
            clock.advance_to(due_ns)


async def test_every_step_happens_at_its_time() -> None:
    """Lines and words go out in order, each at the instant of its step."""
    done, hands = await acted()
    assert hands.calls == [
        (0.0, "open"),
        (0.0, "set tank-1.consumer 8"),
        (0.0, "set tank-2.consumer 0"),
        (12.0, "ask"),
        (12.0, "hold tank-1"),
        (30.0, "watch"),
    ]
    assert [one.ok for one in done] == [True, True, True]
    assert done[1].answer == "“hold tank-1” is applied"


async def test_a_refused_request_is_a_failed_step_with_its_reason() -> None:
    """The story goes on after it."""
    done, _ = await acted(lambda hands: hands.__dict__.update(state=RequestState.REFUSED, reason="not now"))
    assert [one.ok for one in done] == [True, False, True]
    assert done[1].answer == "“hold tank-1” is refused: not now"


async def test_a_plant_that_refuses_a_line_fails_the_step_only() -> None:
    """What it said stands in the answer; later steps still happen."""
    done, _ = await acted(lambda hands: hands.__dict__.update(provoke_error=ProvokeError("no such signal")))
    assert done[0].answer == "no such signal"
    assert [one.ok for one in done] == [False, True, True]


@pytest.mark.parametrize(
    "error",
    [NobodyThereError("nobody"), RequestError("what?"), StorageMissingError("no file")],
    ids=lambda e: type(e).__name__,
)
async def test_a_gateway_that_cannot_be_asked_fails_the_step_only(error: Exception) -> None:
    """Nobody there, words it does not know, no file of requests."""
    done, _ = await acted(lambda hands: hands.__dict__.update(ask_error=error))
    assert [one.ok for one in done] == [True, False, True]
    assert done[1].answer == str(error)
