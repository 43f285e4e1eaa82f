"""Tests of forecast disturbances: a value for every step of the horizon."""

from dataclasses import replace
from math import nan

import numpy as np
import pytest

from controllers.arrays import Floats
from controllers.exceptions import ForecastError, NotFiniteError
from controllers.plans import Measured
from controllers.synthesis import Design
from tests.controllers.plants import SHAPES, anywhere, row, zone_quantities, zones
from tests.controllers.solvers import best_plan, clarabel_solver, condensed, piqp_solver
from tests.controllers.test_synthesis import KINDS, UNLIMITED, first_inputs


def forecasting(kind: str, shape: str, seed: int) -> tuple[Design, Measured]:
    """A random plant designed for forecasts, and a measurement with a random one."""
    rng, what = np.random.default_rng(seed), KINDS[kind]
    network = what.network(SHAPES[shape](rng), rng)
    design = Design.build(
        network,
        what.quantities(network, rng),
        horizon=what.horizon,
        locality=what.locality,
        settings=UNLIMITED,
        forecast=True,
    )
    measured = anywhere(network, rng, what.size)
    return design, replace(measured, w=0.3 * what.size * rng.normal(size=(what.horizon, network.e.shape[1])))


@pytest.mark.parametrize("kind", sorted(KINDS))
@pytest.mark.parametrize("shape", sorted(SHAPES))
def test_the_plan_for_a_forecast_is_the_whole_plant_s(kind: str, shape: str) -> None:
    """Cost and first inputs of the optimum that two solvers find on the plant simulated with the forecast."""
    design, measured = forecasting(kind, shape, 3)
    plan, _ = design.solve(measured)
    data = design.data()
    for solver in (clarabel_solver, piqp_solver):
        whole = best_plan(solver, *condensed(design.table, measured), data)
        np.testing.assert_allclose(first_inputs(design, plan.rows), first_inputs(design, whole), atol=1e-6)
        assert data.cost(plan.rows) == pytest.approx(data.cost(whole), rel=1e-6)


def test_a_held_disturbance_is_a_forecast_that_does_not_change() -> None:
    """w (r,), w repeated (T, r), and a design without forecasts all make the same plan."""
    design, measured = forecasting("zones", "row", 1)
    table = design.table
    held = replace(measured, w=measured.w[0])
    plain = Design.build(table.network, table.quantities, horizon=6, locality=1, settings=UNLIMITED)
    expected = plain.solve(held)[0].rows
    np.testing.assert_allclose(design.solve(held)[0].rows, expected, atol=1e-8)
    repeated = replace(measured, w=np.tile(held.w, (6, 1)))
    np.testing.assert_allclose(design.solve(repeated)[0].rows, expected, atol=1e-8)


def test_what_is_foreseen_is_met_before_it_comes() -> None:
    """A strong draw three steps ahead warms its zone now, and costs less than if it came as a surprise."""
    network = zones(row(5))
    design = Design.build(network, zone_quantities(network), horizon=6, locality=1, settings=UNLIMITED, forecast=True)
    calm = Measured(np.zeros(5), np.zeros((6, 5)), np.zeros(5))
    draw = calm.w.copy()
    draw[3, 2] = -4.0
    costs = []
    for knows in (True, False):
        x, cost = np.zeros(5), 0.0
        for k in range(6):
            ahead = np.zeros((6, 5))
            if knows:
                ahead[: 6 - k] = draw[k:]
            plan, _ = design.solve(Measured(x, ahead, np.zeros(5)))
            if k == 0:
                assert bool(plan.inputs[2] > 1e-3) is knows
            x = network.a @ x + network.b @ plan.inputs + network.e @ draw[k]
            cost += float(x @ x) / 64 + 0.05 * float(plan.inputs @ plan.inputs) / 16
        costs.append(cost)
    assert costs[0] < costs[1]


def test_a_design_without_forecasts_refuses_one() -> None:
    """It is not averaged, cut or taken for something else."""
    network = zones(row(3))
    design = Design.build(network, zone_quantities(network), horizon=4, locality=1)
    with pytest.raises(ForecastError, match="build the design with forecast=True"):
        design.solve(Measured(np.zeros(3), np.zeros((4, 3)), np.zeros(3)))


@pytest.mark.parametrize(
    ("w", "message"),
    [
        (np.zeros((3, 3)), r"disturbances have shape \(3, 3\); the network wants \(3,\) or \(4, 3\)"),
        (np.where(np.arange(12).reshape(4, 3) == 7, nan, 0.0), "disturbance of section 'zone-2' is nan"),
    ],
)
def test_a_forecast_of_the_wrong_make_is_refused(w: Floats, message: str) -> None:
    """Shape and numbers are checked, and the section is named."""
    network = zones(row(3))
    design = Design.build(network, zone_quantities(network), horizon=4, locality=1, forecast=True)
    with pytest.raises(NotFiniteError, match=message):
        design.solve(Measured(np.zeros(3), w, np.zeros(3)))
