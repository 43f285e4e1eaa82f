"""What a bench must show: every criterion passes on a good run and fails on exactly its own fault."""

from __future__ import annotations

from dataclasses import replace

import pytest

from gateway.bench.acting import Done
from gateway.bench.criteria import judge_bench
from gateway.bench.figures import Figures
from gateway.bench.story import Step
from tests.gateway.bench.test_closing import FIGURES, HELD, WELL

STEPS = (Step(0.0, "settle", "It settles."), Step(12.0, "target change", "A target moves."))
DONE = tuple(Done(step, True, "done") for step in STEPS)
GOOD = replace(FIGURES, sections=(WELL,))


def failed(figures: Figures, done: tuple[Done, ...] = DONE) -> list[str]:
    """Names of the criteria that were not met."""
    return [criterion.name for criterion in judge_bench(figures, STEPS, done) if not criterion.passed]


def test_a_good_run_meets_all() -> None:
    """Nothing to complain of."""
    assert failed(GOOD) == []


@pytest.mark.parametrize(
    ("figures", "name"),
    [
        (replace(GOOD, sections=(HELD,)), "no miss that nothing provoked"),
        (replace(GOOD, out_of_limits=1), "no input written outside its hard limits"),
        (replace(GOOD, skipped=2), "no period skipped"),
        (replace(GOOD, lost=1), "nothing lost from the journal"),
        (replace(GOOD, ended=False), "the run ended in order"),
    ],
)
def test_each_fault_fails_its_own_criterion(figures: Figures, name: str) -> None:
    """One fault, one criterion."""
    assert failed(figures) == [name]


def test_a_step_that_failed_is_named_with_its_answer() -> None:
    """What the plant or the gateway said stands in what was found."""
    done = (DONE[0], Done(STEPS[1], False, "“target x 1” is refused: no such tag"))
    (story, *_) = judge_bench(GOOD, STEPS, done)
    assert not story.passed
    assert story.found == "target change: “target x 1” is refused: no such tag"


def test_steps_that_were_not_reached_count() -> None:
    """A bench that was stopped early did not show its story."""
    (story, *_) = judge_bench(GOOD, STEPS, DONE[:1])
    assert (story.passed, story.found) == (False, "1 not reached")
