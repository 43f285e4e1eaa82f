"""What a bench run must show to count as passed, each criterion with what was found."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from gateway.bench.acting import Done
from gateway.bench.figures import Figures
from gateway.bench.story import Step


@dataclass(frozen=True)
class Criterion:
    """One thing that was asked for, and whether it was so."""

    name: str
    passed: bool
    found: str


def judge_bench(figures: Figures, planned: Sequence[Step], done: Sequence[Done]) -> tuple[Criterion, ...]:
    """Judge a run.

    Args:
        figures: of the run.
        planned: steps that had a place in it.
        done: what became of those that were reached.
    """
    failed = [one for one in done if not one.ok]
    untold = len(planned) - len(done)
    story = "; ".join(
        [f"{one.step.name}: {one.answer}" for one in failed] + ([f"{untold} not reached"] if untold else [])
    )
    all_periods = figures.periods * len(figures.sections)
    return (
        Criterion("every step of the story happened", not failed and not untold, story or f"{len(done)} steps"),
        Criterion(
            "no miss that nothing provoked",
            figures.unprovoked == 0,
            f"{figures.unprovoked} of {all_periods} section-periods",
        ),
        Criterion("no input written outside its hard limits", figures.out_of_limits == 0, str(figures.out_of_limits)),
        Criterion("no period skipped", figures.skipped == 0, str(figures.skipped)),
        Criterion("nothing lost from the journal", figures.lost == 0, str(figures.lost)),
        Criterion("the run ended in order", figures.ended, "yes" if figures.ended else "no"),
    )
