"""Tests of quantities with terms in several sections: what neighbours share, from its rows to the plan."""

from dataclasses import replace
from math import nan

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from controllers.exceptions import NetworkError, RowError
from controllers.network import Network
from controllers.quantities import Of, Quantity, Term
from controllers.rows import RowTable
from controllers.synthesis import Design
from tests.controllers.plants import (
    SHAPES,
    anywhere,
    mixed,
    row,
    rows_of_trajectory,
    trajectory,
    zone_quantities,
    zones,
)
from tests.controllers.solvers import best_plan, clarabel_solver, condensed, piqp_solver
from tests.controllers.test_synthesis import UNLIMITED


def supply(first: str, second: str, most: float) -> Quantity:
    """Heater power two zones take together, limited."""
    return Quantity(
        f"supply-{first}-{second}", first, Of.INPUT, span=4, hard=(-9, most), plus=(Term(second, Of.INPUT),)
    )


def shared(network: Network, most: float) -> list[Quantity]:
    """A supply for every coupled pair that starts at an even section, and a priced difference of temperatures."""
    pairs = [(i, int(j)) for i, near in enumerate(network.localities(1)) for j in near if j > i and i % 2 == 0]
    names = network.names
    return [
        *(supply(names[i], names[j], most) for i, j in pairs),
        *(
            Quantity(
                f"step-{i}-{j}", names[i], Of.OUTPUT, span=8, price=0.7, plus=(Term(names[j], Of.OUTPUT, (-1.0,)),)
            )
            for i, j in pairs
        ),
    ]


@given(shape=st.sampled_from(sorted(SHAPES)), seed=st.integers(0, 1000))
def test_rows_add_up_terms_of_every_kind_at_their_own_step(shape: str, seed: int) -> None:
    """Maps of sums over sections and kinds show what a simulation shows, step by step."""
    rng = np.random.default_rng(seed)
    network = mixed(SHAPES[shape](rng), rng)
    terms = [
        Term(name, of, tuple(rng.uniform(0.5, 2.0, int(at[i + 1] - at[i])).tolist()))
        for i, name in enumerate(network.names)
        for of, at in (
            (Of.STATE, network.x_at), (Of.OUTPUT, network.y_at), (Of.INPUT, network.u_at), (Of.MOVE, network.u_at)
        )
        if at[i + 1] > at[i]
    ]  # fmt: skip
    first, *others = [terms[int(k)] for k in rng.permutation(len(terms))]
    quantity = Quantity("all", first.section, first.of, first.mix, span=3.0, plus=tuple(others))
    table = RowTable.build(network, [quantity], 4)
    measured, inputs = anywhere(network, rng), rng.normal(size=(4, network.b.shape[1]))
    states = trajectory(network, measured.x, measured.w, inputs)
    qx, qu, qp = table.maps
    found = qx @ states.reshape(-1) + qu @ inputs.reshape(-1) + qp @ measured.u_before
    expected = rows_of_trajectory(network, [quantity], states, inputs, measured.u_before)
    np.testing.assert_allclose(found, expected, rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("shape", sorted(SHAPES))
@pytest.mark.parametrize("seed", [0, 1])
def test_a_shared_supply_is_planned_as_the_whole_plant_would(shape: str, seed: int) -> None:
    """With limits on what neighbours draw together, the plan is the whole plant's optimum, and the limits bind."""
    rng = np.random.default_rng(seed)
    network = zones(SHAPES[shape](rng), rng)
    quantities = [*zone_quantities(network, rng), *shared(network, 1.0)]
    design = Design.build(network, quantities, horizon=5, locality=1, settings=UNLIMITED)
    measured = anywhere(network, rng, 3.0)
    measured = replace(measured, x=-np.abs(measured.x))
    plan, _ = design.solve(measured)
    data = design.data()
    for solver in (clarabel_solver, piqp_solver):
        whole = best_plan(solver, *condensed(design.table, measured), data)
        assert data.cost(plan.rows) == pytest.approx(data.cost(whole), rel=1e-6)
        for quantity in design.table.quantities:
            first = design.table.rows_of(quantity.name).start
            assert plan.rows[first] == pytest.approx(whole[first], abs=1e-6)
    limited = [design.table.rows_of(q.name) for q in design.table.quantities if q.name.startswith("supply")]
    assert any(np.isclose(plan.rows[rows], data.upper[rows], atol=1e-9).any() for rows in limited)


def test_the_inputs_applied_keep_a_shared_limit_to_within_the_residual() -> None:
    """The sum of two applied inputs passes a shared limit by no more than the residual of the rows that make it up."""
    network = zones(row(5))
    quantities = [*zone_quantities(network), supply("zone-2", "zone-3", 1.0)]
    design = Design.build(network, quantities, horizon=5, locality=1, settings=UNLIMITED)
    cold = anywhere(network, np.random.default_rng(0))
    cold = replace(cold, x=np.full(5, -6.0))
    for passes in (1, 5, 20, 100, UNLIMITED.max_iterations):
        plan, _ = design.solve(cold, max_iterations=passes)
        over = (plan.inputs[1] + plan.inputs[2] - 1.0) / 4
        assert over <= 3 * plan.primal[1:3].max()
    assert over == pytest.approx(0.0, abs=1e-8)


def test_a_sum_is_not_taken_for_an_input() -> None:
    """Only a quantity that is one input by itself says what to apply; a supply does not, whichever is listed first."""
    network = zones(row(3))
    design = Design.build(
        network, [supply("zone-1", "zone-2", 0.5), *zone_quantities(network)], horizon=4, locality=1, settings=UNLIMITED
    )
    plan, _ = design.solve(replace(anywhere(network, np.random.default_rng(0)), x=np.array([-4.0, 5.0, 0.0])))
    assert plan.inputs[0] == plan.rows[design.table.rows_of("zone-1.heater").start] * 4


@pytest.mark.parametrize(
    ("network", "second", "message"),
    [
        (
            zones(row(5)),
            "zone-4",
            "quantity 'supply-zone-1-zone-4' adds up 'zone-1' and 'zone-4', which lie 3 couplings apart, "
            "beyond the locality 1; set the locality to 3 or split it",
        ),
        (
            zones((4, [(0, 1), (2, 3)])),
            "zone-4",
            "quantity 'supply-zone-1-zone-4' adds up 'zone-1' and 'zone-4', which lie in separate plants, "
            "beyond the locality 1; split it",
        ),
    ],
)
def test_sections_too_far_apart_share_nothing(network: Network, second: str, message: str) -> None:
    """A sum beyond the locality is refused by name, with the locality that would do, if one would."""
    with pytest.raises(RowError) as caught:
        Design.build(network, [*zone_quantities(network), supply("zone-1", second, 1.0)], horizon=4, locality=1)
    assert str(caught.value) == message


@pytest.mark.parametrize(
    ("term", "error", "message"),
    [
        (Term("zone-9", Of.INPUT), NetworkError, "no section is called 'zone-9'"),
        (Term("zone-2", Of.INPUT, (1.0, 1.0)), RowError, "mix has 2 coefficients, but section 'zone-2' has 1 inputs"),
        (Term("zone-2", Of.INPUT, (0.0,)), RowError, r"mix is \(0.0,\) in section 'zone-2'; give finite coefficients"),
        (Term("zone-2", Of.INPUT, (nan,)), RowError, r"mix is \(nan,\) in section 'zone-2'; give finite coefficients"),
    ],
)
def test_a_term_that_does_not_fit_is_refused(term: Term, error: type[Exception], message: str) -> None:
    """Every term is checked like a quantity's own."""
    with pytest.raises(error, match=message):
        RowTable.build(zones(row(3)), [Quantity("sum", "zone-1", Of.INPUT, plus=(term,))], 4)


def test_a_quantity_that_shows_nothing_is_refused() -> None:
    """An output that reads no state, or terms that cancel, make no row to iterate on: refused by name."""
    network = Network.from_matrices([[0.5]], [[1.0]], states={"one": 1}, c=[[0.0]])
    blind = Quantity("blind", "one", Of.OUTPUT)
    nought = Quantity("nought", "one", Of.STATE, plus=(Term("one", Of.STATE, (-1.0,)),))
    good = Quantity("x", "one", Of.STATE, price=1.0)
    for quantity in (blind, nought):
        with pytest.raises(RowError, match=f"quantity '{quantity.name}' shows nothing of the plant"):
            Design.build(network, [good, quantity], horizon=3, locality=0)
