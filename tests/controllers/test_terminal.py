"""Tests of `controllers.terminal`: what the steps beyond the horizon cost."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import solve_discrete_are, solve_discrete_lyapunov

from controllers.arrays import Floats
from controllers.exceptions import NetworkError, TerminalPriceError
from controllers.network import Network
from controllers.plans import Measured, Settings
from controllers.quantities import Of, Quantity, Term
from controllers.rows import RowTable
from controllers.spectrum import closed_loop_radius, unlimited_law
from controllers.synthesis import Design
from controllers.terminal import terminal_quantities
from tests.controllers.plants import (
    SHAPES,
    row,
    rows_of_trajectory,
    tank_quantities,
    tanks,
    unlimited,
    zone_quantities,
    zones,
)

KINDS: dict[str, tuple[Callable[..., Network], Callable[..., list[Quantity]]]] = {
    "zones": (zones, zone_quantities),
    "tanks": (tanks, tank_quantities),
}


def law(network: Network, quantities: list[Quantity], horizon: int, *, ended: bool) -> Floats:
    """First inputs of the unlimited plan, linear in (x, u_{-1}), with terminal prices or without."""
    more = terminal_quantities(network, quantities, horizon) if ended else ()
    table = RowTable.build(network, [*quantities, *more], horizon)
    n, r = network.a.shape[0], network.e.shape[1]
    return np.delete(unlimited_law(table, table.data()), np.s_[n : n + r], axis=1)


@given(st.integers(0, 1000), st.integers(1, 3), st.integers(1, 2))
def test_two_steps_of_a_lone_section_have_the_endless_regulator_s_gain(seed: int, n: int, m: int) -> None:
    """At T = 2, whatever the section (unstable too), the law is SciPy's Riccati gain of x'Qx + u'Ru, to 1e-6."""
    rng = np.random.default_rng(seed)
    a, b = rng.normal(0, 0.8, (n, n)), rng.normal(size=(n, m))
    network = Network.from_matrices(a, b, states={"one": n}, inputs={"one": m})
    price_x, price_u = rng.uniform(0.2, 2.0, n), rng.uniform(0.2, 2.0, m)
    quantities = [
        *(Quantity(f"x{k}", "one", Of.STATE, tuple(np.eye(n)[k]), price=price_x[k]) for k in range(n)),
        *(Quantity(f"u{k}", "one", Of.INPUT, tuple(np.eye(m)[k]), price=price_u[k]) for k in range(m)),
    ]
    p = solve_discrete_are(a, b, np.diag(price_x), np.diag(price_u))
    gain = -np.linalg.solve(np.diag(price_u) + b.T @ p @ b, b.T @ p @ a)
    scale = np.abs(gain).max()
    np.testing.assert_allclose(law(network, quantities, 2, ended=True)[:, :n], gain, rtol=0, atol=1e-6 * (1 + scale))


def test_the_synthesis_itself_plans_the_regulator_s_input_two_steps_ahead() -> None:
    """A lone tank with priced moves: the iteration run to its end at T = 2 gives the gain of T = 150, to 1e-6."""
    network = tanks((1, []))
    quantities = unlimited(tank_quantities(network))
    long = law(network, quantities, 150, ended=False)
    more = terminal_quantities(network, quantities, 2)
    options = Settings(rho=0.1, tolerance_spans=1e-12, max_iterations=100_000, chunk=100)
    design = Design.build(network, [*quantities, *more], horizon=2, locality=0, settings=options)
    for start in np.eye(3):
        plan, _ = design.solve(Measured(start[:2], np.zeros(1), start[2:]))
        assert plan.inputs[0] == pytest.approx(long[0] @ start, abs=1e-6)


@pytest.mark.parametrize("kind", sorted(KINDS))
def test_coupled_sections_need_a_shorter_horizon(kind: str) -> None:
    """On a coupled plant the least T within 1 % of the endless gain is smaller, and any T is four times as near."""
    make, quantities_of = KINDS[kind]
    network = make(row(4), np.random.default_rng(0))
    quantities = unlimited(quantities_of(network))
    endless = law(network, quantities, 150, ended=False)

    def off(steps: int, *, ended: bool) -> float:
        return float(np.abs(law(network, quantities, steps, ended=ended) - endless).max())

    for steps in (2, 5, 10):
        assert off(steps, ended=True) < off(steps, ended=False) / 4
    enough = 0.01 * float(np.abs(endless).max())
    needed = {ended: next(t for t in range(2, 40) if off(t, ended=ended) < enough) for ended in (True, False)}
    assert needed[True] < needed[False]


def test_a_short_horizon_alone_may_be_unstable_and_is_not_with_terminal_prices() -> None:
    """A section that runs away slowly is let go by two steps that price inputs dearly; terminal prices hold it."""
    network = Network.from_matrices([[1.05]], [[0.1]], states={"one": 1})
    quantities = [Quantity("x", "one", Of.STATE, price=1.0), Quantity("u", "one", Of.INPUT, price=5.0)]
    alone = RowTable.build(network, quantities, 2)
    ended = RowTable.build(network, [*quantities, *terminal_quantities(network, quantities, 2)], 2)
    assert closed_loop_radius(alone, alone.data()) > 1
    assert closed_loop_radius(ended, ended.data()) < 1


@settings(max_examples=6)
@given(st.sampled_from(sorted(SHAPES)), st.integers(0, 1000))
def test_they_cost_what_all_later_steps_cost(shape: str, seed: int) -> None:
    """Sections without couplings: the terminal rows of (x, u_{-1}) cost what simulating their own regulator costs."""
    rng = np.random.default_rng(seed)
    size, _ = SHAPES[shape](rng)
    network = tanks((size, []), rng)
    quantities = unlimited(tank_quantities(network, rng))
    more = terminal_quantities(network, quantities, 2)
    endless = law(network, quantities, 2, ended=True)
    n = network.a.shape[0]
    x, u = rng.normal(size=n), rng.normal(size=size)
    at_the_end = rows_of_trajectory(network, more, x[None], u[None], np.zeros(size))
    total = 0.0
    prices = np.array([quantity.price for quantity in quantities])
    for _ in range(300):
        new = endless @ np.concatenate([x, u])
        x = network.a @ x + network.b @ new
        total += float(prices @ rows_of_trajectory(network, quantities, x[None], new[None], u) ** 2)
        u = new
    assert float(at_the_end @ at_the_end) == pytest.approx(total, rel=1e-6)


def test_only_the_last_step_is_priced() -> None:
    """Everything else about them is nought: no target, no band, no limit, one name each."""
    network = tanks(row(3))
    more = terminal_quantities(network, tank_quantities(network), 5, weight=0.5)
    assert [quantity.name for quantity in more[:4]] == [
        "tank-1.terminal-1", "tank-1.terminal-2", "tank-1.terminal-3", "tank-2.terminal-1"
    ]  # fmt: skip
    for quantity in more:
        assert quantity.price == (0.0, 0.0, 0.0, 0.0, 1.0)
        assert quantity.weight == 0.5
        assert {term.section for term in quantity.terms} == {quantity.section}
        assert replace(quantity, price=0.0, weight=1.0) == Quantity(
            quantity.name, quantity.section, quantity.of, quantity.mix, plus=quantity.plus
        )


def test_units_do_not_matter_to_what_is_kept() -> None:
    """A state in units a million times smaller makes the same number of terminal quantities of the same cost."""
    a, b, unit = np.array([[0.9, 0.2], [0.0, 0.8]]), np.array([[0.0], [1.0]]), np.diag([1.0, 1e6])
    costs = []
    for scale in (np.eye(2), unit):
        network = Network.from_matrices(scale @ a @ np.linalg.inv(scale), scale @ b, states={"one": 2})
        quantities = [
            Quantity("x", "one", Of.STATE, (1.0, 0.0), price=1.0),
            Quantity("u", "one", Of.INPUT, price=0.1),
        ]
        more = terminal_quantities(network, quantities, 2)
        assert len(more) == 2
        rows = rows_of_trajectory(network, more, (scale @ [0.3, -0.7])[None], np.zeros((1, 1)), np.zeros(1))
        costs.append(float(rows @ rows))
    assert costs[0] == pytest.approx(costs[1], rel=1e-9)


def test_a_stable_section_without_input_is_priced_by_what_it_will_do() -> None:
    """A passive section's terminal price is the Lyapunov solution of its own decay."""
    network = Network.from_matrices([[0.8]], np.zeros((1, 0)), states={"one": 1}, inputs={})
    (only,) = terminal_quantities(network, [Quantity("x", "one", Of.STATE, price=2.0)], 3)
    expected = solve_discrete_lyapunov([[0.8]], [[2.0 * 0.8**2]])[0, 0]
    assert only.mix[0] ** 2 == pytest.approx(expected)
    assert only.plus == ()


def test_a_price_sequence_goes_on_with_its_last_and_shared_quantities_stay_out() -> None:
    """Prices (9, 9, 1) end like the price 1; what two sections share is nobody's own."""
    network = zones(row(2))
    plain = [replace(quantity, price=1.0) for quantity in zone_quantities(network)]
    varied = [replace(quantity, price=(9.0, 9.0, 1.0)) for quantity in plain]
    both = Quantity("both", "zone-1", Of.INPUT, price=50.0, plus=(Term("zone-2", Of.INPUT),))
    assert terminal_quantities(network, plain, 3) == terminal_quantities(network, [*varied, both], 3)


def test_prices_can_be_overridden_by_section() -> None:
    """A matrix over the states, or over states and last inputs, replaces the Riccati solution; None prices nothing."""
    network = tanks(row(3))
    over_x, over_both = np.array([[4.0, 1.0], [1.0, 2.0]]), np.diag([1.0, 0.0, 9.0])
    more = terminal_quantities(
        network, tank_quantities(network), 3, override={"tank-1": over_x, "tank-2": over_both, "tank-3": None}
    )
    x, u = np.array([[1.0, 2.0, 3.0, 4.0, 5.0, 6.0]]), np.array([[7.0, 8.0, 9.0]])
    rows = rows_of_trajectory(network, more, x, u, np.zeros(3))
    by_section = {
        name: sum(value**2 for value, q in zip(rows, more, strict=True) if q.section == name) for name in network.names
    }
    assert by_section["tank-1"] == pytest.approx(x[0, :2] @ over_x @ x[0, :2])
    assert by_section["tank-2"] == pytest.approx(x[0, 2] ** 2 + 9.0 * 64.0)
    assert by_section["tank-3"] == 0


@pytest.mark.parametrize(
    ("override", "error", "message"),
    [
        ({"tank-9": None}, NetworkError, "no section is called 'tank-9'"),
        ({"tank-1": np.eye(4)}, TerminalPriceError, r"'tank-1' has shape \(4, 4\); give \(2, 2\) over its states or"),
        ({"tank-1": np.array([[1.0, 0.5], [0.0, 1.0]])}, TerminalPriceError, "not a finite symmetric matrix"),
        ({"tank-1": np.diag([np.nan, 1.0])}, TerminalPriceError, "not a finite symmetric matrix"),
        ({"tank-1": np.diag([1.0, -2.0])}, TerminalPriceError, "eigenvalue -2; prices must not be negative"),
    ],
)
def test_an_override_that_makes_no_sense_is_refused(
    override: dict[str, Floats | None], error: type[Exception], message: str
) -> None:
    """The error names the section, what is wrong and what to give."""
    network = tanks(row(2))
    with pytest.raises(error, match=message):
        terminal_quantities(network, tank_quantities(network), 3, override=override)


@pytest.mark.parametrize("inputs", [0, 1])
def test_a_section_that_runs_away_has_no_price_of_its_own(inputs: int) -> None:
    """An unstable section that its input does not move, or that has none, is named, and what to do."""
    network = Network.from_matrices([[1.2]], np.zeros((1, inputs)), states={"one": 1}, inputs={"one": inputs})
    quantities = [Quantity("x", "one", Of.STATE, price=1.0)]
    if inputs:
        quantities.append(Quantity("u", "one", Of.INPUT, price=1.0))
    with pytest.raises(TerminalPriceError, match=r"section 'one' has no terminal price of its own .*override it with"):
        terminal_quantities(network, quantities, 3)
    assert terminal_quantities(network, quantities, 3, override={"one": None}) == ()


def test_sections_that_are_alike_get_the_same_prices_and_others_their_own() -> None:
    """Equal tanks end alike; a tank with other numbers or other prices does not."""
    network = tanks((4, []))
    quantities = tank_quantities(network)
    dearer = [replace(q, price=2.0) if q.name == "tank-3.level" else q for q in quantities]
    mixes = [
        [(term.of, term.mix) for q in terminal_quantities(network, dearer, 3) if q.section == name for term in q.terms]
        for name in network.names
    ]
    assert mixes[0] == mixes[1] == mixes[3]
    assert mixes[2] != mixes[0]
