"""Tests of `controllers.responses`.

`everything` makes every state and input a row, so that a contribution shows itself whole and can be simulated.
"""

import re
from collections.abc import Callable
from functools import partial

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import null_space

from controllers.arrays import Floats, Ints
from controllers.exceptions import NotLocalizableError
from controllers.network import Network
from controllers.quantities import Of
from controllers.responses import least_locality, localized_responses, require_localizable
from controllers.rows import RowTable
from tests.controllers.plants import (
    SHAPES,
    everything,
    grid,
    mixed,
    row,
    tank_quantities,
    tanks,
    trajectory,
    zone_quantities,
    zones,
)

KINDS: dict[str, tuple[Callable[..., Network], int]] = {"zones": (zones, 1), "tanks": (partial(tanks, late=True), 2)}
plants = st.tuples(st.sampled_from(sorted(KINDS)), st.sampled_from(sorted(SHAPES)), st.integers(0, 1000))


def plant(drawn: tuple[str, str, int]) -> tuple[RowTable, int]:
    """A row table that shows everything, with random weights, and the least locality of its kind."""
    kind, shape, seed = drawn
    rng = np.random.default_rng(seed)
    make, locality = KINDS[kind]
    network = make(SHAPES[shape](rng), rng)
    return RowTable.build(network, everything(network, rng), 5), locality


def unfold(table: RowTable, rows: Ints, values: Floats) -> tuple[Floats, Floats]:
    """States (T, n) and inputs (T, m) of a contribution, zero where it touches no row, from its weighted rows."""
    full = np.zeros(table.count)
    full[rows] = values
    full /= np.sqrt(table.weight)
    by_step = full.reshape(-1, table.horizon).T
    of_state = np.array([quantity.of is Of.STATE for quantity in table.quantities])
    return by_step[:, of_state], by_step[:, ~of_state]


def outside(network: Network, inside: Ints) -> Ints:
    """States of the sections that are not inside."""
    return network.states_of(np.setdiff1d(np.arange(network.size), inside))


@settings(max_examples=12)
@given(plants)
def test_the_particular_response_obeys_the_plant(drawn: tuple[str, str, int]) -> None:
    """H_i p simulated on the whole plant is H_i p: the dynamics hold, and nothing outside the locality moves."""
    table, locality = plant(drawn)
    net = table.network
    for i, (response, inside) in enumerate(
        zip(localized_responses(table, locality), net.localities(locality), strict=True)
    ):
        assert response.report.localizable
        n, r = int(net.x_at[i + 1] - net.x_at[i]), int(net.w_at[i + 1] - net.w_at[i])
        for k in range(n + r):
            x, w = np.zeros(net.a.shape[0]), np.zeros(net.e.shape[1])
            (x if k < n else w)[net.x_at[i] + k if k < n else net.w_at[i] + k - n] = 1.0
            states, inputs = unfold(table, response.rows, response.gain[:, k])
            np.testing.assert_allclose(trajectory(net, x, w, inputs), states, atol=1e-9)
            assert not states[:, outside(net, inside)].any()
        assert not response.gain[:, n + r :].any()


def test_an_input_may_stop_what_its_own_section_does_outside() -> None:
    """Even alone, a section is confined when its input cancels what its state and disturbance do to its neighbour.

    Section 0 pushes section 1 by 0.4 x + 0.3 w + u, so its input is −0.4 x − 0.3 w at every step, and nothing is free.
    """
    network = Network.from_matrices(
        [[0.5, 0.0], [0.4, 0.5]], [[0.2, 0.0], [1.0, 1.0]], states={"0": 1, "1": 1}, e=[[1.0, 0.0], [0.3, 1.0]]
    )
    table = RowTable.build(network, everything(network), 4)
    response = localized_responses(table, 0)[0]
    assert response.report.localizable
    assert response.basis.shape[1] == 0
    for k, (x, w) in enumerate((([1.0, 0.0], [0.0, 0.0]), ([0.0, 0.0], [1.0, 0.0]))):
        states, inputs = unfold(table, response.rows, response.gain[:, k])
        own = np.concatenate([[x[0]], states[:-1, 0]])
        np.testing.assert_allclose(inputs[:, 0], -0.4 * own - 0.3 * w[0], atol=1e-12)
        np.testing.assert_allclose(trajectory(network, np.array(x), np.array(w), inputs), states, atol=1e-12)
        assert not states[:, 1].any()


@settings(max_examples=12)
@given(plants)
def test_the_basis_is_all_that_is_free_to_choose(drawn: tuple[str, str, int]) -> None:
    """N_i is orthonormal, obeys the plant from rest, stays inside, and spans every input sequence that does."""
    table, locality = plant(drawn)
    net, steps = table.network, table.horizon
    n, m = net.a.shape[0], net.b.shape[1]
    rest = np.zeros(n), np.zeros(net.e.shape[1])
    effect = np.array([trajectory(net, *rest, unit.reshape(steps, m)) for unit in np.eye(steps * m)])
    for response, inside in zip(localized_responses(table, locality), net.localities(locality), strict=True):
        np.testing.assert_allclose(response.basis.T @ response.basis, np.eye(response.basis.shape[1]), atol=1e-12)
        for column in response.basis.T:
            states, inputs = unfold(table, response.rows, column)
            np.testing.assert_allclose(trajectory(net, *rest, inputs), states, atol=1e-9)
            assert not states[:, outside(net, inside)].any()
        own = (np.arange(steps)[:, None] * m + net.inputs_of(inside)).reshape(-1)
        escaping = effect[own][:, :-1, outside(net, inside)].reshape(len(own), -1).T
        last = effect[own][:, -1, outside(net, inside)].reshape(len(own), -1).T
        allowed = null_space(np.vstack([escaping, last, np.zeros((1, len(own)))]), rcond=1e-9)
        assert response.basis.shape[1] == allowed.shape[1]


@settings(max_examples=12)
@given(plants)
def test_the_particular_response_is_the_least(drawn: tuple[str, str, int]) -> None:
    """H_i has no part that N_i could take away: it is the response of least weighted norm."""
    table, locality = plant(drawn)
    for response in localized_responses(table, locality):
        np.testing.assert_allclose(response.basis.T @ response.gain, 0.0, atol=1e-9)


def test_moves_start_from_the_input_written_last() -> None:
    """A move row answers u_{-1} with its negative at the first step, and only with what the basis cannot undo."""
    network = tanks(row(3))
    table = RowTable.build(network, tank_quantities(network), 4)
    response = localized_responses(table, 2)[1]
    unscaled = np.zeros(table.count)
    expected = np.zeros(table.count)
    expected[table.rows_of("tank-2.move").start] = -np.sqrt(3.0) / 100
    left = expected[response.rows] - response.basis @ (response.basis.T @ expected[response.rows])
    unscaled[response.rows] = response.gain[:, -1]
    np.testing.assert_allclose(unscaled[response.rows], left, atol=1e-14)


def test_sections_with_equal_matrices_share_their_arrays() -> None:
    """In a row of equal zones the inner sections are computed once and hold the same arrays."""
    network = zones(row(9))
    responses = localized_responses(RowTable.build(network, zone_quantities(network), 4), 1)
    inner = {id(response.basis) for response in responses[2:-2]}
    assert len(inner) == 1
    assert len({id(response.gain) for response in responses[2:-2]}) == 1
    assert id(responses[0].basis) not in inner


def test_sections_with_different_matrices_do_not_share() -> None:
    """Different numbers, different arrays."""
    network = zones(row(5), np.random.default_rng(0))
    responses = localized_responses(RowTable.build(network, zone_quantities(network), 4), 1)
    assert len({id(response.basis) for response in responses}) == 5


def test_a_locality_that_is_too_small_is_explained() -> None:
    """With actuator lag one coupling is not enough: the error names sections, boundaries and the least that works."""
    network = tanks(row(7), late=True)
    table = RowTable.build(network, tank_quantities(network), 6)
    with pytest.raises(NotLocalizableError) as caught:
        require_localizable(table, localized_responses(table, 1))
    message = str(caught.value)
    assert re.match(
        r"section 'tank-1' cannot be confined to 1 couplings: tank-3 would feel it \(residual \d\.\de-0\d\); ", message
    )
    assert "section 'tank-4' cannot be confined to 1 couplings: tank-" in message
    assert message.endswith("; and 2 more. Fix: set the locality to 2")
    assert all(response.report.localizable for response in localized_responses(table, 2))


def test_no_locality_helps_a_plant_without_actuators() -> None:
    """When an influence cannot be stopped anywhere the error says so instead of naming a locality."""
    size = 12
    network = Network.from_matrices(
        np.eye(size) + np.eye(size, k=1) + np.eye(size, k=-1),
        np.zeros((size, 0)),
        states=dict.fromkeys([f"zone-{i}" for i in range(size)], 1),
        inputs={},
    )
    table = RowTable.build(network, everything(network), 12)
    with pytest.raises(NotLocalizableError, match=r"no locality helps: some section lacks an actuator within reach"):
        require_localizable(table, localized_responses(table, 1))
    assert least_locality(table, 1, 3) is None


def test_a_reported_boundary_lies_just_outside() -> None:
    """The boundary named is a section one coupling beyond the locality, for every section that is not confined."""
    network = tanks(grid(2, 4), np.random.default_rng(2), late=True)
    table = RowTable.build(network, tank_quantities(network), 5)
    near, far = network.localities(1), network.localities(2)
    stuck = [response.report for response in localized_responses(table, 1) if not response.report.localizable]
    assert stuck
    for report in stuck:
        i = network.index(report.section)
        assert report.boundary is not None
        assert network.index(report.boundary) in set(far[i]) - set(near[i])


@settings(max_examples=8)
@given(st.sampled_from(sorted(SHAPES)), st.integers(0, 1000))
def test_a_locality_that_holds_everybody_always_works(shape: str, seed: int) -> None:
    """Without an outside there is nothing to confine, whatever the sections are made of."""
    rng = np.random.default_rng(seed)
    network = mixed(SHAPES[shape](rng), rng)
    table = RowTable.build(network, everything(network), 4)
    reports = [response.report for response in localized_responses(table, network.size)]
    assert all(report.localizable and report.boundary is None for report in reports)
