"""Tests of `controllers.rest`: where the plant will rest, and terminal prices counted from there."""

from collections.abc import Callable
from dataclasses import fields

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from controllers.arrays import Floats
from controllers.central import solve_central
from controllers.exceptions import TerminalPriceError
from controllers.network import Network
from controllers.plans import Measured
from controllers.quantities import Of, Quantity
from controllers.rest import Rest
from controllers.rows import RowTable
from controllers.terminal import terminal_quantities
from tests.controllers.plants import SHAPES, anywhere, row, tank_quantities, tanks, unlimited, zone_quantities, zones

KINDS: dict[str, tuple[Callable[..., Network], Callable[..., list[Quantity]]]] = {
    "zones": (zones, zone_quantities),
    "tanks": (tanks, tank_quantities),
}


def ended(network: Network, quantities: list[Quantity], horizon: int) -> tuple[RowTable, Rest]:
    """A table with terminal quantities and its resting point."""
    more = terminal_quantities(network, quantities, horizon)
    table = RowTable.build(network, [*quantities, *more], horizon)
    return table, Rest.build(table, more)


@settings(max_examples=15)
@given(st.sampled_from(sorted(KINDS)), st.sampled_from(sorted(SHAPES)), st.integers(0, 1000))
def test_the_plant_rests_there_and_nowhere_cheaper(kind: str, shape: str, seed: int) -> None:
    """x = A x + B u + E w, and no other point at which the plant rests costs less."""
    rng = np.random.default_rng(seed)
    make, quantities_of = KINDS[kind]
    network = make(SHAPES[shape](rng), rng)
    quantities = unlimited(quantities_of(network, rng))
    table, rest = ended(network, quantities, 3)
    out = [quantity.name for quantity in quantities if quantity.of is Of.OUTPUT]
    data = table.retarget(table.data(), dict(zip(out, rng.normal(0, 3, len(out)), strict=True)))
    w = rng.normal(size=network.e.shape[1])
    x, u, _ = rest.point(data, w)
    np.testing.assert_allclose(network.a @ x + network.b @ u + network.e @ w, x, atol=1e-8)

    def cost(u: Floats) -> float:
        x = np.linalg.solve(np.eye(len(network.a.toarray())) - network.a.toarray(), network.b @ u + network.e @ w)
        rows = rest.on_x @ x + rest.on_u @ u
        return float(rest.price @ (rows - data.target[2::3]) ** 2)

    for _ in range(5):
        assert cost(u + 0.1 * rng.normal(size=len(u))) >= cost(u) - 1e-9


@pytest.mark.parametrize("kind", sorted(KINDS))
@pytest.mark.parametrize("steps", [2, 5])
def test_with_a_target_and_a_disturbance_a_short_plan_starts_like_an_endless_one(kind: str, steps: int) -> None:
    """A lone section, a target elsewhere, a lasting disturbance: the first input of T steps is that of 200, to 1e-6.

    Zones price the heater itself, so that resting costs something and the tilt matters; tanks price only moves.
    """
    make, quantities_of = KINDS[kind]
    network = make((1, []))
    quantities = unlimited(quantities_of(network))
    out, inp = (next(q for q in quantities if q.of is of) for of in (Of.OUTPUT, Of.INPUT))
    n = network.a.shape[0]
    measured = Measured(np.linspace(1.0, 2.0, n), np.array([0.8]), np.array([0.4]))
    long = RowTable.build(network, quantities, 200)
    endless = solve_central(long, measured, long.retarget(long.data(), {out.name: 3.0}))[long.rows_of(inp.name).start]
    table, rest = ended(network, quantities, steps)
    data = table.retarget(table.data(), {out.name: 3.0})
    short = solve_central(table, measured, rest.aim(data, measured.w))[table.rows_of(inp.name).start]
    unaimed = solve_central(table, measured, data)[table.rows_of(inp.name).start]
    assert short == pytest.approx(endless, abs=1e-6)
    assert abs(unaimed - endless) > 1e-3


def test_coupled_sections_rest_together() -> None:
    """On a coupled plant, aimed terminal prices bring a short plan closer to the endless one than none do."""
    network = tanks(row(4), np.random.default_rng(0))
    quantities = unlimited(tank_quantities(network))
    measured = anywhere(network, np.random.default_rng(2))
    targets = {"tank-2.level": 4.0}
    long, bare = (RowTable.build(network, quantities, steps) for steps in (150, 5))
    table, rest = ended(network, quantities, 5)
    data = rest.aim(table.retarget(table.data(), targets), measured.w)

    def first(table: RowTable, plan: Floats) -> Floats:
        return np.array([plan[table.rows_of(f"{name}.pump").start] for name in network.names])

    endless = first(long, solve_central(long, measured, long.retarget(long.data(), targets)))
    with_ends = first(table, solve_central(table, measured, data))
    without = first(bare, solve_central(bare, measured, bare.retarget(bare.data(), targets)))
    assert np.abs(with_ends - endless).max() < 0.2 * np.abs(without - endless).max()


def test_aiming_changes_the_terminal_targets_alone() -> None:
    """Other targets, prices and limits stay, and what was handed in is untouched."""
    network = zones(row(3))
    table, rest = ended(network, zone_quantities(network), 4)
    data = table.retarget(table.data(), {"zone-1.temperature": 2.0})
    kept = {field.name: getattr(data, field.name).copy() for field in fields(data)}
    aimed = rest.aim(data, np.ones(3))
    terminal = np.zeros(table.count, dtype=bool)
    for quantity in rest.terminal:
        terminal[table.rows_of(quantity.name)] = True
    assert (aimed.target[terminal] != 0).all()
    assert (aimed.target[~terminal] == data.target[~terminal]).all()
    assert all((getattr(data, name) == values).all() for name, values in kept.items())


def test_a_plant_that_cannot_rest_is_refused() -> None:
    """Two integrators fed by the same disturbance and no input between them have no resting point."""
    network = Network.from_matrices(np.eye(2), [[0.0], [0.0]], states={"one": 2}, e=[[1.0], [1.0]])
    table = RowTable.build(network, [Quantity("x", "one", Of.STATE, (1.0, 0.0), price=1.0)], 3)
    with pytest.raises(TerminalPriceError, match=r"the plant has no resting point .*needs an input that stops it"):
        Rest.build(table, ())


def test_the_last_step_of_a_forecast_is_what_persists() -> None:
    """A forecast is aimed like its last value held."""
    network = zones(row(3))
    table, rest = ended(network, zone_quantities(network), 4)
    w = np.random.default_rng(0).normal(size=(4, 3))
    assert (rest.aim(table.data(), w).target == rest.aim(table.data(), w[-1]).target).all()
