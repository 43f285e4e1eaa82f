"""Tests of `controllers.contradiction`: hard limits that cannot all be met are named, and a solve says when to ask."""

from dataclasses import fields, replace
from math import inf, nan

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog

from controllers.contradiction import Contradiction, find_contradiction
from controllers.exceptions import NotFiniteError
from controllers.network import Network
from controllers.plans import Measured, Outcome, Settings
from controllers.quantities import Of, Quantity
from controllers.row_rule import Region
from controllers.rows import RowData, RowTable
from controllers.synthesis import Design
from tests.controllers.plants import SHAPES, anywhere, row, tank_quantities, tanks, zone_quantities, zones
from tests.controllers.solvers import condensed


def at_rest(network: Network) -> Measured:
    """Nothing deviates."""
    return Measured(*(np.zeros(matrix.shape[1]) for matrix in (network.a, network.e, network.b)))


def flooded() -> tuple[Design, Measured]:
    """Tank 2 stands 15 cm high under a hard ceiling of 1 cm that its pump cannot bring it to in time."""
    network = tanks(row(3))
    ceiling = Quantity("tank-2.ceiling", "tank-2", Of.OUTPUT, span=40, hard=(-1.0, 1.0))
    design = Design.build(network, [*tank_quantities(network), ceiling], horizon=6, locality=2)
    return design, replace(at_rest(network), x=np.array([0, 0, 15.0, 0, 0, 0]))


def test_the_limit_that_must_give_way_is_named_and_what_it_gives_way_to() -> None:
    """The ceiling is out of reach: by how much in its own unit, against the pumps and moves that do all they can."""
    design, measured = flooded()
    found = find_contradiction(design.table, measured, design.data())
    assert found is not None
    (only,) = found.broken
    assert (only.quantity, only.side, only.step) == ("tank-2.ceiling", Region.UPPER, 0)
    assert 10.0 < only.stretch < 14.0
    assert only.total_spans > 5 * only.stretch / 40 * 0.5
    assert {limit.quantity for limit in found.against} >= {"tank-2.pump", "tank-2.move"}
    assert all(limit.side is Region.LOWER and limit.stretch == 0 for limit in found.against)
    assert str(found).startswith(
        f"hard limits contradict each other: upper limit of 'tank-2.ceiling' by {only.stretch:.3g} at step 0 "
        "must give way to lower limit of 'tank-2.move' (step 0); "
    )


@pytest.mark.parametrize("chunk", [2, 5])
def test_a_solve_against_a_contradiction_says_that_it_stalled(chunk: int) -> None:
    """Whether told to stop or out of iterations, standing still apart is said, and the limits still hold."""
    design, measured = flooded()
    design = replace(design, settings=Settings(chunk=chunk))
    data = design.data()
    counted, _ = design.solve(measured, max_iterations=200)
    told, _ = design.solve(measured, may_continue=lambda done: done < 200)
    assert counted.outcome is Outcome.OUT_OF_ITERATIONS
    assert told.outcome is Outcome.OUT_OF_TIME
    for plan in (counted, told):
        assert plan.stalled
        assert (plan.rows >= data.lower).all()
        assert (plan.rows <= data.upper).all()
        assert plan.residual.argmax() == 1


@pytest.mark.parametrize("tight", [False, True])
@pytest.mark.parametrize("seed", range(4))
def test_a_solve_stalls_where_limits_contradict_each_other_and_nowhere_else(tight: bool, seed: int) -> None:
    """From 50 passes on, however many: with contradicting limits always stalled, without them never."""
    rng = np.random.default_rng(seed)
    network = zones(row(5), rng)
    quantities = zone_quantities(network, rng)
    if tight:
        quantities += [Quantity(f"{name}.tight", name, Of.OUTPUT, span=8, hard=(-0.6, 0.6)) for name in network.names]
    options = Settings(tolerance_spans=1e-9)
    design = Design.build(network, quantities, horizon=6, locality=1, settings=options)
    measured = anywhere(network, rng, 3.0)
    assert (find_contradiction(design.table, measured, design.data()) is not None) is tight
    for passes in (50, 80, 150):
        plan, _ = design.solve(measured, max_iterations=passes)
        assert plan.outcome is Outcome.OUT_OF_ITERATIONS
        assert plan.stalled is tight


def test_a_few_passes_are_too_few_to_tell() -> None:
    """A solve cut short is not called stalled, and neither is one that converged."""
    design, measured = flooded()
    assert not design.solve(measured, max_iterations=design.settings.chunk * 7)[0].stalled
    assert not design.solve(at_rest(design.table.network))[0].stalled


def test_outputs_give_way_before_inputs() -> None:
    """A zone held hot beside one held cold: both outputs' limits stretch, never the heaters' that stand in the way."""
    network = zones(row(5))
    quantities = [
        *zone_quantities(network),
        Quantity("floor", "zone-2", Of.OUTPUT, span=8, hard=(2.0, inf)),
        Quantity("ceiling", "zone-3", Of.OUTPUT, span=8, hard=(-inf, -1.0)),
    ]
    table = RowTable.build(network, quantities, 6)
    found = find_contradiction(table, at_rest(network), table.data())
    assert found is not None
    assert [(limit.quantity, limit.side) for limit in found.broken] == [
        ("floor", Region.LOWER), ("ceiling", Region.UPPER)
    ]  # fmt: skip
    assert {(limit.quantity, limit.side) for limit in found.against} >= {
        ("zone-2.heater", Region.UPPER), ("zone-3.heater", Region.LOWER)
    }  # fmt: skip


def test_a_held_input_against_its_move_limit() -> None:
    """An input held farther away than a move may take it: the two limits of the one input are named, in its unit."""
    network = tanks(row(3))
    table = RowTable.build(network, tank_quantities(network), 4)
    held = table.confine(table.data(), {"tank-2.pump": (30.0, 30.0)})
    found = find_contradiction(table, at_rest(network), held)
    assert found is not None
    involved = {limit.quantity for limit in (*found.broken, *found.against)}
    assert involved == {"tank-2.pump", "tank-2.move"}
    assert sum(limit.total_spans for limit in found.broken) == pytest.approx(0.2, abs=1e-6)


@settings(max_examples=15)
@given(st.sampled_from(sorted(SHAPES)), st.integers(0, 1000))
def test_the_least_stretch_is_the_least(shape: str, seed: int) -> None:
    """Its sum is that of a linear program over inputs alone by a simplex code of its own; none where none is needed."""
    rng = np.random.default_rng(seed)
    network = zones(SHAPES[shape](rng), rng)
    tight = [
        Quantity(f"{name}.tight", name, Of.OUTPUT, span=8, hard=(-1.0, 1.0))
        for name in network.names[:: rng.integers(1, 4)]
    ]
    table = RowTable.build(network, [*zone_quantities(network, rng), *tight], 4)
    measured, data = anywhere(network, rng, 1.5), table.data()
    offset, matrix = condensed(table, measured)
    count, free = matrix.shape
    grip = np.repeat([1.0 if q.of is Of.OUTPUT else 100.0 for q in table.quantities], 4)
    rows = np.vstack([np.hstack([matrix, -np.eye(count)]), np.hstack([-matrix, -np.eye(count)])])
    room = np.concatenate([data.upper - offset, offset - data.lower])
    there = np.isfinite(room)
    bounds = [(None, None)] * free + [(0, None)] * count
    truth = linprog(
        np.concatenate([np.zeros(free), grip]), A_ub=rows[there], b_ub=room[there], bounds=bounds, method="highs-ds"
    )
    found = find_contradiction(table, measured, data)
    if truth.fun < 1e-9:
        assert found is None
    else:
        assert found is not None
        of = {quantity.name: quantity.of for quantity in table.quantities}
        total = sum(limit.total_spans * (1.0 if of[limit.quantity] is Of.OUTPUT else 100.0) for limit in found.broken)
        assert total == pytest.approx(truth.fun, rel=1e-5, abs=1e-5)


def test_every_named_limit_matters() -> None:
    """Lifting the limit that must give way, and any one that it gives way to, lessens the stretch."""
    design, measured = flooded()
    data = design.data()
    found = find_contradiction(design.table, measured, data)
    assert found is not None
    for limit in (*found.broken, *found.against):
        rows = design.table.rows_of(limit.quantity)
        name = "upper" if limit.side is Region.UPPER else "lower"
        lifted = getattr(data, name).copy()
        lifted[rows] = inf if limit.side is Region.UPPER else -inf
        less = find_contradiction(design.table, measured, replace(data, **{name: lifted}))
        assert total(less) < total(found) - 1e-6


def total(found: Contradiction | None) -> float:
    """Sum of all stretch, in spans."""
    return 0.0 if found is None else sum(limit.total_spans for limit in found.broken)


def test_no_hard_limit_no_contradiction() -> None:
    """Where nothing is hard, nothing contradicts."""
    network = zones(row(2))
    table = RowTable.build(network, [Quantity("t", "zone-1", Of.OUTPUT, price=1.0)], 3)
    assert find_contradiction(table, at_rest(network), table.data()) is None


def test_a_limit_that_is_not_a_number_is_refused() -> None:
    """A NaN limit is not read as none; nothing handed in is changed."""
    design, measured = flooded()
    data = design.data()
    spoiled = replace(data, upper=np.where(np.arange(len(data.upper)) == 3, nan, data.upper))
    with pytest.raises(NotFiniteError, match="upper hard limit of quantity"):
        find_contradiction(design.table, measured, spoiled)
    kept = RowData(**{field.name: getattr(data, field.name).copy() for field in fields(data)})
    find_contradiction(design.table, measured, data)
    assert all((getattr(kept, field.name) == getattr(data, field.name)).all() for field in fields(data))
