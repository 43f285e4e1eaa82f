"""Check 1: the row rule (5) against one-row quadratic programs by two general-purpose solvers.

Source of the rule: arXiv:2005.13807. Thousands of independent rows are put side by side as one separable program, with
every band and limit that can degenerate degenerate somewhere:

    minimise  q (z − c)² + s e² + p/2 (z − a)²   over  lo <= z <= hi,  b_lo − e <= z <= b_hi + e,  e >= 0
"""

from dataclasses import replace

import numpy as np
import pytest

from controllers.arrays import Floats
from controllers.row_rule import row_rule
from controllers.rows import RowData
from tests.controllers.random_rows import random_rows
from tests.controllers.solvers import SOLVERS, Program, best_plan, row_program

ROWS, BATCHES = 500, 8


def by_solver(solver: str, a: Floats, penalty: Floats, data: RowData) -> Floats:
    """Solve all rows at once; the pull p/2 (z − a)² is merged into price and target."""
    price = data.price + penalty / 2
    pulled = replace(data, price=price, target=(data.price * data.target + penalty / 2 * a) / price)
    return best_plan(SOLVERS[solver], np.zeros(len(a)), np.eye(len(a)), pulled)


@pytest.mark.parametrize("solver", sorted(SOLVERS))
@pytest.mark.parametrize("batch", range(BATCHES))
def test_random_rows(solver: str, batch: int) -> None:
    """4000 random rows, all regions and limits of no width among them, agree to 1e-9."""
    a, penalty, data = random_rows(np.random.default_rng(batch), ROWS)
    np.testing.assert_allclose(row_rule(a, penalty, data), by_solver(solver, a, penalty, data), rtol=0, atol=1e-9)


def test_random_rows_reach_every_region() -> None:
    """The rows above fall in each region, with and without band, at each limit, many times."""
    inside = above = below = at_lower = at_upper = pointed = held = 0
    for batch in range(BATCHES):
        a, penalty, data = random_rows(np.random.default_rng(batch), ROWS)
        z = row_rule(a, penalty, data)
        banded, free = data.soft_price > 0, (z > data.lower) & (z < data.upper)
        inside += int((banded & free & (z > data.soft_lower) & (z < data.soft_upper)).sum())
        above += int((banded & free & (z > data.soft_upper)).sum())
        below += int((banded & free & (z < data.soft_lower)).sum())
        at_lower += int((z == data.lower).sum())
        at_upper += int((z == data.upper).sum())
        pointed += int((banded & free & (data.soft_lower == data.soft_upper)).sum())
        held += int((data.lower == data.upper).sum())
    assert min(inside, above, below, at_lower, at_upper, pointed, held) > 100


@pytest.mark.parametrize("solver", sorted(SOLVERS))
def test_both_solvers_see_the_same_program(solver: str) -> None:
    """The program itself is right: a row pulled past a hard limit, by hand."""
    program = row_program(np.zeros(1), np.eye(1), RowData(*(np.array([v]) for v in (1.0, 5.0, 0.0, -9, 9, -2.0, 2.0))))
    assert isinstance(program, Program)
    assert SOLVERS[solver](program)[0] == pytest.approx(2.0, abs=1e-9)
