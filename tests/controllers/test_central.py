"""Tests of `controllers.central`; independent solvers check the same program in tests/outside/test_whole_plant.py."""

from dataclasses import fields

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from controllers.central import assemble, solve_central
from controllers.exceptions import ReferenceSolveError
from controllers.plans import Measured
from controllers.quantities import Of, Quantity
from controllers.rows import RowTable
from tests.controllers.plants import (
    SHAPES,
    anywhere,
    row,
    rows_of_trajectory,
    tank_quantities,
    tanks,
    trajectory,
    unlimited,
    zone_quantities,
    zones,
)


def test_hard_limits_that_cannot_be_met_are_an_error() -> None:
    """A hard limit on a level the pump cannot keep has no plan; the error carries the solver's status and the fix."""
    network = tanks(row(3))
    quantities = [
        *tank_quantities(network),
        Quantity("tank-2.ceiling", "tank-2", Of.OUTPUT, span=40, hard=(-1.0, 1.0)),
    ]
    table = RowTable.build(network, quantities, 6)
    flooded = Measured(np.array([0, 0, 15.0, 0, 0, 0]), np.zeros(3), np.zeros(3))
    with pytest.raises(
        ReferenceSolveError, match=r"not solved: PrimalInfeasible; check that its hard limits can be met"
    ):
        solve_central(table, flooded, table.data())


@settings(max_examples=20)
@given(st.sampled_from(sorted(SHAPES)), st.integers(0, 1000))
def test_the_program_is_the_plant_and_the_rows(shape: str, seed: int) -> None:
    """A simulated trajectory satisfies the program's dynamics, gives its rows, and costs what the rows cost."""
    rng = np.random.default_rng(seed)
    network = tanks(SHAPES[shape](rng), rng)
    table = RowTable.build(network, unlimited(tank_quantities(network, rng)), 5)
    measured = anywhere(network, rng)
    inputs = rng.normal(size=(5, network.size))
    states = trajectory(network, measured.x, measured.w, inputs)
    rows = rows_of_trajectory(network, table.quantities, states, inputs, measured.u_before)
    qp = assemble(table, measured, table.data())
    v = np.concatenate([states.reshape(-1), inputs.reshape(-1)])
    np.testing.assert_allclose(qp.k @ v, qp.lower, atol=1e-9)
    np.testing.assert_allclose(qp.row_map @ v + qp.row_offset, rows, atol=1e-12)
    at_rest = np.zeros_like(v)
    constant = table.data().cost(qp.row_offset + qp.row_map @ at_rest)
    assert 0.5 * v @ (qp.p @ v) + qp.g @ v + constant == pytest.approx(table.data().cost(rows), rel=1e-9, abs=1e-9)


@settings(max_examples=20)
@given(st.integers(0, 1000))
def test_no_plan_within_limits_is_cheaper(seed: int) -> None:
    """The reference obeys every hard limit and the plant, and a random allowed plan never costs less."""
    rng = np.random.default_rng(seed)
    network = zones(SHAPES["row"](rng), rng)
    quantities = zone_quantities(network, rng)
    table = RowTable.build(network, quantities, 5)
    measured, data = anywhere(network, rng, 3.0), table.data()
    best = solve_central(table, measured, data)
    heaters = [q for q in table.quantities if q.of is Of.INPUT]
    inputs = np.array([best[table.rows_of(q.name)] * q.span for q in heaters]).T
    states = trajectory(network, measured.x, measured.w, inputs)
    again = rows_of_trajectory(network, table.quantities, states, inputs, measured.u_before)
    np.testing.assert_allclose(again, best, atol=1e-8)
    assert (best >= data.lower - 1e-8).all()
    assert (best <= data.upper + 1e-8).all()
    low, high = np.array([q.hard for q in heaters]).T
    for size in (1e-3, 0.1, 1.0):
        other = np.clip(inputs + size * rng.normal(size=inputs.shape), low, high)
        states = trajectory(network, measured.x, measured.w, other)
        rows = rows_of_trajectory(network, table.quantities, states, other, measured.u_before)
        assert data.cost(rows) >= data.cost(best) - 1e-8


def test_data_is_not_modified() -> None:
    """Row numbers and measurement handed in are the same afterwards."""
    network = zones(row(3))
    table = RowTable.build(network, zone_quantities(network), 4)
    measured, data = anywhere(network, np.random.default_rng(0)), table.data()
    kept = [(array := getattr(holder, f.name), array.copy()) for holder in (measured, data) for f in fields(holder)]
    solve_central(table, measured, data)
    assert all((array == copy).all() for array, copy in kept)
