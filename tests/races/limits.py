"""What explicit rows cost: the same passes on the same plant with and without bands and limits, paired.

Without means infinite limits and unpriced bands in the same kernels: nothing ever binds, no branch is ever taken.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from time import perf_counter

import numpy as np

from controllers.rows import RowData
from controllers.synthesis import Design
from tests.races.contest import Contest
from tests.races.course import Stretch

PASSES = 20


@dataclass(frozen=True)
class RowCost:
    """Seconds for the same number of passes with and without limits, pair by pair."""

    limited_s: tuple[float, ...]
    free_s: tuple[float, ...]

    @property
    def ratios(self) -> tuple[float, ...]:
        """Limited over free, pair by pair."""
        return tuple(a / b for a, b in zip(self.limited_s, self.free_s, strict=True))


def without_limits(data: RowData) -> RowData:
    """The same prices and targets, nothing limited."""
    nothing = np.full(len(data.price), np.inf)
    return RowData(data.price, data.target, np.zeros(len(nothing)), -nothing, nothing, -nothing, nothing)


def row_cost(contest: Contest, stretches: Sequence[Stretch], repeats: int) -> RowCost:
    """Time whole solves of a fixed number of passes, cold, limited and free in turn."""
    design = replace(contest.design, settings=replace(contest.design.settings, tolerance_spans=0.0))
    limited, free = [], []
    for repeat in range(repeats + 1):
        for stretch in stretches:
            pair = _solve(design, stretch, stretch.data), _solve(design, stretch, without_limits(stretch.data))
            if repeat > 0:
                limited.append(pair[0])
                free.append(pair[1])
    return RowCost(tuple(limited), tuple(free))


def _solve(design: Design, stretch: Stretch, data: RowData) -> float:
    start = perf_counter()
    design.solve(stretch.measured, data, max_iterations=PASSES)
    return perf_counter() - start
