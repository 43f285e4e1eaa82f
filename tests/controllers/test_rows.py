"""Tests of `controllers.rows`."""

from collections.abc import Callable
from dataclasses import fields
from math import inf, nan
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from controllers.exceptions import NetworkError, RowError
from controllers.quantities import Of, Quantity
from controllers.rows import RowData, RowTable
from tests.controllers.plants import (
    SHAPES,
    anywhere,
    grid,
    mixed,
    row,
    rows_of_trajectory,
    tank_quantities,
    tanks,
    trajectory,
    zone_quantities,
    zones,
)


def level(**changes: Any) -> Quantity:
    """A good quantity with changes."""
    good: dict[str, Any] = {"name": "tank-1.level", "section": "tank-1", "of": Of.OUTPUT, "span": 40.0}
    return Quantity(**(good | changes))


@pytest.mark.parametrize(
    ("wrong", "message"),
    [
        ({"mix": (0.0, 0.0)}, "mix is .*not all zero"),
        ({"mix": (1.0, nan)}, "mix is .*finite"),
        ({"span": 0.0}, "span is 0.0; give a positive, finite span"),
        ({"span": inf}, "span is inf"),
        ({"span": nan}, "span is nan"),
        ({"weight": -1.0}, "weight is -1.0; give a positive, finite weight"),
        ({"price": -0.1}, "price is -0.1; give zero or more"),
        ({"price": (1.0, nan)}, "price is .*nan"),
        ({"target": inf}, "target is inf; give a finite target"),
        ({"soft_price": -1.0}, "soft_price is -1.0; give zero or more"),
        ({"soft_price": inf}, "soft_price is inf"),
        ({"soft": (2.0, 1.0)}, r"soft band is \(2.0, 1.0\); give \(lower, upper\) with lower <= upper"),
        ({"soft": (nan, 1.0)}, "soft band is .*nan"),
        ({"hard": (2.0, 1.0)}, r"hard limits are \(2.0, 1.0\); give \(lower, upper\)"),
        ({"hard": (0.0, nan)}, "hard limits are .*nan"),
    ],
)
def test_a_quantity_that_makes_no_sense_is_refused(wrong: dict[str, Any], message: str) -> None:
    """The error names the quantity, the field, its value and what to give."""
    with pytest.raises(RowError, match=f"quantity 'tank-1.level': {message}"):
        level(**wrong)


@pytest.mark.parametrize(
    ("quantities", "horizon", "error", "message"),
    [
        ([level()], 1, RowError, "horizon is 1; give 2 steps or more"),
        ([], 5, RowError, "no quantity is priced or limited"),
        ([level(), level()], 5, RowError, "quantity 'tank-1.level' stands twice"),
        ([level(mix=(1.0, 2.0))], 5, RowError, "mix has 2 coefficients, but section 'tank-1' has 1 outputs"),
        ([level(of=Of.STATE)], 5, RowError, "mix has 1 coefficients, but section 'tank-1' has 2 states"),
        ([level(of=Of.MOVE, mix=(1.0, 1.0))], 5, RowError, "section 'tank-1' has 1 inputs"),
        ([level(price=(1.0, 2.0))], 5, RowError, "2 prices for 5 steps; give one number or one per step"),
        ([level(section="tank-9")], 5, NetworkError, "no section is called 'tank-9'"),
    ],
)
def test_a_table_that_does_not_fit_is_refused(
    quantities: list[Quantity], horizon: int, error: type[Exception], message: str
) -> None:
    """Structure is checked against the network before anything is computed."""
    with pytest.raises(error, match=message):
        RowTable.build(tanks(row(2)), quantities, horizon)


def test_quantities_stand_in_the_order_of_their_sections() -> None:
    """Rows of one section lie together, however the quantities were listed, and are found by name."""
    network = tanks(row(3))
    table = RowTable.build(network, tank_quantities(network)[::-1], 4)
    assert (np.diff(table.section) >= 0).all()
    assert table.count == 3 * 3 * 4
    rows = table.rows_of("tank-2.pump")
    assert rows.stop - rows.start == 4
    assert set(table.section[rows]) == {1}
    with pytest.raises(RowError, match=r"no quantity is called 'tank-2\.valve'"):
        table.rows_of("tank-2.valve")


@given(shape=st.sampled_from(sorted(SHAPES)), seed=st.integers(0, 1000), horizon=st.integers(2, 5))
def test_maps_show_what_a_simulation_shows(shape: str, seed: int, horizon: int) -> None:
    """Qx x + Qu u + Qp u_{-1} equals the rows read off a trajectory step by step, for mixes of every kind."""
    rng = np.random.default_rng(seed)
    network = mixed(SHAPES[shape](rng), rng)
    quantities = []
    for i, name in enumerate(network.names):
        for of, at in ((Of.OUTPUT, network.y_at), (Of.STATE, network.x_at), (Of.INPUT, network.u_at)):
            count = int(at[i + 1] - at[i])
            if count:
                mix = tuple(rng.uniform(0.5, 2.0, count).tolist())
                quantities.append(Quantity(f"{name}.{of.value}", name, of, mix, span=float(rng.uniform(0.5, 50))))
                if of is Of.INPUT:
                    quantities.append(Quantity(f"{name}.move", name, Of.MOVE, mix, span=3.0))
    table = RowTable.build(network, quantities, horizon)
    measured = anywhere(network, rng)
    inputs = rng.normal(size=(horizon, network.b.shape[1]))
    states = trajectory(network, measured.x, measured.w, inputs)
    qx, qu, qp = table.maps
    found = qx @ states.reshape(-1) + qu @ inputs.reshape(-1) + qp @ measured.u_before
    expected = rows_of_trajectory(network, table.quantities, states, inputs, measured.u_before)
    np.testing.assert_allclose(found, expected, rtol=1e-12, atol=1e-12)


def test_numbers_are_in_spans_and_prices_may_differ_by_step() -> None:
    """Targets, bands and limits are divided by the span; a price sequence is laid along the horizon."""
    quantity = level(price=(1.0, 2.0, 3.0), target=4.0, soft=(-8.0, 8.0), soft_price=5.0, hard=(-20.0, 10.0))
    data = RowTable.build(tanks(row(2)), [quantity], 3).data()
    expected = {
        "price": [1, 2, 3],
        "target": [0.1] * 3,
        "soft_price": [5] * 3,
        "soft_lower": [-0.2] * 3,
        "soft_upper": [0.2] * 3,
        "lower": [-0.5] * 3,
        "upper": [0.25] * 3,
    }
    assert {field.name: getattr(data, field.name).tolist() for field in fields(data)} == expected


def test_cost_counts_price_and_band() -> None:
    """(2) at one value: price times the square to the target plus soft price times the square outside the band."""
    data = RowTable.build(
        tanks(row(2)), [level(span=1.0, price=2.0, target=1.0, soft=(-1.0, 2.0), soft_price=10.0)], 2
    ).data()
    assert data.cost(np.array([1.0, 1.0])) == 0.0
    assert data.cost(np.array([3.0, 1.0])) == pytest.approx(2 * 2**2 + 10 * 1**2)
    assert data.cost(np.array([1.0, -3.0])) == pytest.approx(2 * 4**2 + 10 * 2**2)


def test_following_shifts_a_plan_by_one_period() -> None:
    """Every row takes the value one step later of its own quantity; the last repeats."""
    network = zones(row(2))
    table = RowTable.build(network, zone_quantities(network), 3)
    assert np.arange(12)[table.following].reshape(4, 3).tolist() == [[1, 2, 2], [4, 5, 5], [7, 8, 8], [10, 11, 11]]


def test_retarget_and_confine_leave_the_original_untouched() -> None:
    """Other targets and limits are new data in the quantity's own units, everything else is the same array."""
    network = zones(row(3))
    table = RowTable.build(network, zone_quantities(network), 4)
    before = table.data()
    kept = {field.name: getattr(before, field.name).copy() for field in fields(before)}
    moved = table.retarget(before, {"zone-2.temperature": 2.0})
    held = table.confine(before, {"zone-3.heater": (1.0, 1.0), "zone-1.heater": ([-1, -1, -2, -2], 2.0)})
    for name, values in kept.items():
        assert (getattr(before, name) == values).all()
    rows = table.rows_of("zone-2.temperature")
    assert (moved.target[rows] == 2.0 / 8).all()
    assert np.count_nonzero(moved.target != before.target) == 4
    assert moved.lower is before.lower
    rows = table.rows_of("zone-3.heater")
    assert (held.lower[rows] == 0.25).all()
    assert (held.upper[rows] == 0.25).all()
    assert held.lower[table.rows_of("zone-1.heater")].tolist() == [-0.25, -0.25, -0.5, -0.5]
    assert np.count_nonzero(held.upper != before.upper) == 4
    assert held.target is before.target


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda table, data: table.confine(data, {"zone-1.heater": (2.0, 1.0)}), "hard limits 2.0 .. 1.0 are crossed"),
        (lambda table, data: table.confine(data, {"zone-1.heater": (nan, 1.0)}), "hard limits nan .. 1.0 are crossed"),
        (lambda table, data: table.confine(data, {"zone-1.valve": (0.0, 1.0)}), "no quantity is called 'zone-1.valve'"),
        (lambda table, data: table.retarget(data, {"zone-1.valve": 0.0}), "no quantity is called 'zone-1.valve'"),
    ],
)
def test_limits_that_cross_and_unknown_names_are_refused(
    change: Callable[[RowTable, RowData], RowData], message: str
) -> None:
    """Crossed or NaN limits and unknown quantities are named, and nothing has changed."""
    network = zones(row(2))
    table = RowTable.build(network, zone_quantities(network), 3)
    data = table.data()
    kept = data.lower.copy()
    with pytest.raises(RowError, match=message):
        change(table, data)
    assert (data.lower == kept).all()


def test_rows_of_a_grid_cover_all_sections() -> None:
    """Sections of rows follow the sections of their quantities."""
    network = zones(grid(2, 3))
    table = RowTable.build(network, zone_quantities(network), 3)
    assert np.unique(table.section).tolist() == list(range(6))
    assert table.span.max() == 8.0
    assert (table.weight == 1.0).all()
