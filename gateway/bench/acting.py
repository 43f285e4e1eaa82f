"""The story acted: every step at its time, through the same doors as a person's and a plant's own."""

from __future__ import annotations

from collections.abc import AsyncIterator, Awaitable, Callable, Sequence
from dataclasses import dataclass

from gateway.bench.rehearsal import ProvokeError
from gateway.bench.story import Step
from gateway.clock import NS, Clock
from gateway.journal import StorageError
from gateway.requests import Answer, NobodyThereError, RequestError, RequestState


@dataclass(frozen=True)
class Done:
    """What became of a step: the answers of the plant and of the gateway, in one line."""

    step: Step
    ok: bool
    answer: str


async def act(
    steps: Sequence[Step],
    start_ns: int,
    clock: Clock,
    provoke: Callable[[str], Awaitable[str]],
    ask: Callable[[str], Awaitable[Answer]],
    begins: Callable[[Step], None],
) -> AsyncIterator[Done]:
    """Act out steps, each at its time; one that fails does not keep the next from happening.

    Args:
        steps: in order of their times.
        start_ns: monotonic instant of time zero.
        clock: the injected one.
        provoke: hands a line to the simulated plant.
        ask: hands words to the gateway.
        begins: told of every step as it begins.
    """
    for step in steps:
        await clock.sleep_until(start_ns + round(step.at_s * NS))
        begins(step)
        yield await _one(step, provoke, ask)


async def _one(step: Step, provoke: Callable[[str], Awaitable[str]], ask: Callable[[str], Awaitable[Answer]]) -> Done:
    answers: list[str] = []
    try:
        answers.extend([await provoke(line) for line in step.provoke])
        if step.ask:
            answer = await ask(step.ask)
            reason = f": {answer.reason}" if answer.reason else ""
            answers.append(f"“{step.ask}” is {answer.state}{reason}")
            if answer.state is not RequestState.APPLIED:
                return Done(step, False, "; ".join(answers))
    except (ProvokeError, NobodyThereError, RequestError, StorageError) as error:
        return Done(step, False, "; ".join([*answers, str(error)]))
    return Done(step, True, "; ".join(answers))
