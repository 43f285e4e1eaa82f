"""Tests of `controllers.ending`: reading the plan off an iterate, and telling a stall from a slow solve."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from controllers.ending import first_inputs, plan_of, stalled
from controllers.plans import Outcome
from controllers.quantities import Of, Quantity, Term
from controllers.row_rule import Region
from controllers.rows import RowTable
from tests.controllers.plants import row, zone_quantities, zones

APART = [(0.34, 1e-4)] * 20


@given(st.floats(0.5, 0.95), st.floats(0.01, 10.0), st.integers(1, 60))
def test_residuals_that_fall_together_never_stall(rate: float, ratio: float, count: int) -> None:
    """However slowly both residuals fall, a change that keeps pace with the distance is not standing still."""
    looks = [(rate**k, max(ratio, 0.1) * rate**k) for k in range(count)]
    assert not stalled(looks)


@pytest.mark.parametrize(
    ("looks", "expected"),
    [
        (APART, True),
        (APART[:8], True),
        (APART[:7], False),
        ([], False),
        ([(0.34, 0.1)] * 20, False),
        ([(0.34 * 0.9**k, 1e-4) for k in range(20)], False),
        ([(1.0, 1.0)] * 5 + [(0.3, 1e-3)] * 20, True),
        ([(np.nan, np.nan)] * 20, False),
    ],
)
def test_standing_still_apart_is_a_stall(looks: list[tuple[float, float]], expected: bool) -> None:
    """Apart and still, seen often enough: a stall. Too few looks, still moving or still falling: none."""
    assert stalled(looks) is expected


def small() -> RowTable:
    """Two zones, two quantities each, three steps."""
    network = zones(row(2))
    return RowTable.build(network, zone_quantities(network), 3)


@pytest.mark.parametrize(
    ("outcome", "value", "expected", "said"),
    [
        (Outcome.OUT_OF_ITERATIONS, 0.0, Outcome.OUT_OF_ITERATIONS, True),
        (Outcome.OUT_OF_TIME, 0.0, Outcome.OUT_OF_TIME, True),
        (Outcome.CONVERGED, 0.0, Outcome.CONVERGED, False),
        (Outcome.OUT_OF_ITERATIONS, np.nan, Outcome.NOT_FINITE, False),
    ],
)
def test_only_a_finite_plan_that_did_not_converge_can_be_stalled(
    outcome: Outcome, value: float, expected: Outcome, said: bool
) -> None:
    """The looks count for nothing once a plan converged, or where it is not a number."""
    table = small()
    z = np.full(table.count, value)
    plan = plan_of(table, z, z, np.zeros_like(z), table.data(), 100, outcome, APART)
    assert plan.outcome is expected
    assert plan.stalled is said
    assert np.isnan(plan.inputs).all() == (expected is Outcome.NOT_FINITE)


def test_inputs_are_read_off_what_is_one_input_alone() -> None:
    """A mix with one coefficient says what the input is, scaled back; sums and moves say nothing about it."""
    network = zones(row(2))
    quantities = [
        Quantity("sum", "zone-1", Of.INPUT, plus=(Term("zone-2", Of.INPUT),)),
        Quantity("double", "zone-1", Of.INPUT, (-2.0,), span=4.0, hard=(-8.0, 8.0)),
        Quantity("move", "zone-2", Of.MOVE),
    ]
    table = RowTable.build(network, quantities, 3)
    rows = np.zeros(table.count)
    rows[table.rows_of("sum")], rows[table.rows_of("double")], rows[table.rows_of("move")] = 7.0, 0.5, 3.0
    inputs, region = first_inputs(table, rows, table.data())
    assert inputs[0] == 0.5 * 4.0 / -2.0
    assert np.isnan(inputs[1])
    assert region[0] is Region.FREE
