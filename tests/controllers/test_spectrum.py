"""Tests of `controllers.spectrum`."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import sparse

from controllers.quantities import Of
from controllers.rows import RowTable
from controllers.spectrum import DENSE_LIMIT, closed_loop_radius, spectral_radius, unlimited_law
from tests.controllers.plants import (
    anywhere,
    grid,
    row,
    tank_quantities,
    tanks,
    unlimited,
    zone_quantities,
    zones,
)
from tests.controllers.solvers import best_plan, condensed, piqp_solver


def test_nothing_has_radius_zero() -> None:
    """A matrix without rows has no eigenvalue."""
    assert spectral_radius(sparse.csr_array((0, 0))) == 0.0


@given(st.floats(0.1, 2.0), st.floats(0.0, 3.1))
def test_a_rotation_has_the_radius_of_its_scale(scale: float, angle: float) -> None:
    """Complex pairs count by their modulus."""
    turn = scale * np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    assert spectral_radius(sparse.csr_array(turn)) == pytest.approx(scale, rel=1e-12)


def test_large_matrices_take_the_sparse_way_to_the_same_number() -> None:
    """Above the dense limit the radius of a row with known eigenvalues is found: 0.5 + 0.4 cos(pi / (n + 1))."""
    size = DENSE_LIMIT + 100
    matrix = sparse.diags_array([0.2, 0.5, 0.2], offsets=[-1, 0, 1], shape=(size, size), format="csr")
    assert spectral_radius(matrix) == pytest.approx(0.5 + 0.4 * np.cos(np.pi / (size + 1)), rel=1e-9)


def test_a_large_unstable_matrix_is_found() -> None:
    """One eigenvalue outside the circle among many inside is not missed."""
    size = DENSE_LIMIT + 100
    diagonal = np.linspace(-0.9, 0.9, size)
    diagonal[size // 3] = -1.01
    assert spectral_radius(sparse.diags_array(diagonal, format="csr")) == pytest.approx(1.01, rel=1e-9)


@pytest.mark.parametrize("kind", ["zones", "tanks"])
def test_the_unlimited_law_is_the_first_input_of_the_optimum(kind: str) -> None:
    """K (x, w, u_{-1}) equals the first inputs of the whole-plant program without bands, limits and targets."""
    rng = np.random.default_rng(3)
    network = zones(grid(2, 2), rng) if kind == "zones" else tanks(grid(2, 2), rng)
    quantities = zone_quantities(network, rng) if kind == "zones" else tank_quantities(network, rng)
    table = RowTable.build(network, quantities, 6)
    free = RowTable.build(network, unlimited(quantities), 6)
    law = unlimited_law(table, table.data())
    measured = anywhere(network, rng)
    rows = best_plan(piqp_solver, *condensed(free, measured), free.data())
    inputs = [q for q in table.quantities if q.of is Of.INPUT]
    expected = [rows[table.rows_of(q.name).start] * q.span for q in inputs]
    start = np.concatenate([measured.x, measured.w, measured.u_before])
    np.testing.assert_allclose(law @ start, expected, atol=1e-8)


def test_the_radius_is_the_rate_at_which_the_loop_settles() -> None:
    """Closing the loop with the law shrinks (x, u_{-1}) per period by the reported radius."""
    network = tanks(row(3), np.random.default_rng(1))
    table = RowTable.build(network, tank_quantities(network), 10)
    data = table.data()
    radius = closed_loop_radius(table, data)
    law = unlimited_law(table, data)
    x, u, sizes = np.ones(6), np.zeros(3), []
    for _ in range(200):
        u = law @ np.concatenate([x, np.zeros(3), u])
        x = network.a @ x + network.b @ u
        sizes.append(np.linalg.norm(np.concatenate([x, u])))
    assert 0 < radius < 1
    assert (max(sizes[170:180]) / max(sizes[90:100])) ** (1 / 80) == pytest.approx(radius, abs=0.01)
