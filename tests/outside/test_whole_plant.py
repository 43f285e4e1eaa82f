"""Check 2: the synthesis and the whole-plant reference against two general-purpose solvers, on a program of our own.

The program here is condensed: the plan of the whole plant as an affine function of all inputs, found by simulating one
unit input at a time (Maciejowski, Predictive Control with Constraints, 2002, chapter 2). It shares no line with the
sparse program of `controllers.central`, and Clarabel and PIQP are independent codes. No locality, no split.
"""

from functools import cache

import numpy as np
import pytest

from controllers.arrays import Floats
from controllers.central import solve_central
from controllers.plans import Measured, Outcome, Plan, Settings
from controllers.quantities import Of
from controllers.synthesis import Design
from tests.controllers.plants import SHAPES, anywhere, tank_quantities, tanks, zone_quantities, zones
from tests.controllers.solvers import SOLVERS, best_plan, condensed, localized

UNLIMITED = Settings(tolerance_spans=1e-10, max_iterations=40_000, chunk=50)
SEEDS = range(10, 13)


@cache
def plant(kind: str, shape: str, seed: int) -> tuple[Design, Measured, Plan]:
    """A random plant pushed far enough that limits and bands bind, and its plan with all the time it wants."""
    design, measured = unsolved(kind, shape, seed)
    return design, measured, design.solve(measured)[0]


def unsolved(kind: str, shape: str, seed: int) -> tuple[Design, Measured]:
    """The plant alone."""
    rng = np.random.default_rng(seed)
    if kind == "zones":
        network = zones(SHAPES[shape](rng), rng)
        design = Design.build(network, zone_quantities(network, rng), horizon=7, locality=1, settings=UNLIMITED)
        return design, anywhere(network, rng, 3.0)
    network = tanks(SHAPES[shape](rng), rng, late=True)
    design = Design.build(network, tank_quantities(network, rng), horizon=8, locality=2, settings=UNLIMITED)
    return design, anywhere(network, rng, 12.0)


def first_inputs(design: Design, rows: Floats) -> Floats:
    """First value of every input quantity, in spans."""
    names = [quantity.name for quantity in design.table.quantities if quantity.of is Of.INPUT]
    return np.array([rows[design.table.rows_of(name).start] for name in names])


@pytest.mark.parametrize("solver", sorted(SOLVERS))
@pytest.mark.parametrize("shape", sorted(SHAPES))
@pytest.mark.parametrize("kind", ["tanks", "zones"])
def test_synthesis_and_reference_find_the_whole_plant_optimum(kind: str, shape: str, solver: str) -> None:
    """Cost and first inputs of synthesis, sparse reference, localized truth equal the condensed program's to 1e-6."""
    for seed in SEEDS:
        design, measured, plan = plant(kind, shape, seed)
        data = design.data()
        whole = best_plan(SOLVERS[solver], *condensed(design.table, measured), data)
        truth = best_plan(SOLVERS[solver], *localized(design, measured), data)
        reference = solve_central(design.table, measured, data)
        assert plan.outcome is Outcome.CONVERGED
        for rows in (plan.rows, reference, truth):
            np.testing.assert_allclose(first_inputs(design, rows), first_inputs(design, whole), rtol=0, atol=1e-6)
            assert data.cost(rows) == pytest.approx(data.cost(whole), rel=1e-6, abs=1e-6)


@pytest.mark.parametrize("kind", ["tanks", "zones"])
def test_limits_and_bands_bind_in_these_plants(kind: str) -> None:
    """The comparison is not one of unlimited plans: in every plant some hard limit and some soft band is at work."""
    for shape in SHAPES:
        for seed in SEEDS:
            design, _, plan = plant(kind, shape, seed)
            data, rows = design.data(), plan.rows
            assert ((rows == data.lower) | (rows == data.upper)).any()
            assert ((rows > data.soft_upper + 1e-6) | (rows < data.soft_lower - 1e-6)).any()
