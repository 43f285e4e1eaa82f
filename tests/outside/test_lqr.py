"""Check 4: without limits and over a long horizon, the first inputs are those of the infinite-horizon regulator.

Sources: the discrete algebraic Riccati equation by SciPy (Laub, IEEE TAC 24 (1979) 913-921), and `dlqr` of the Python
Control Systems Library. Prices on moves make the regulator one of the state (x, u_{-1}) with the move as its input.
"""

import control
import numpy as np
import pytest
from scipy.linalg import block_diag, solve_discrete_are

from controllers.arrays import Floats
from controllers.plans import Settings
from controllers.quantities import Of, Quantity
from controllers.rows import RowTable
from controllers.spectrum import closed_loop_radius, unlimited_law
from controllers.synthesis import Design
from tests.controllers.plants import anywhere, everything, grid, row, tank_quantities, tanks, unlimited, zones


def by_riccati(a: Floats, b: Floats, q: Floats, r: Floats) -> Floats:
    """Gain K of u = K x from the stabilising solution of the Riccati equation."""
    p = solve_discrete_are(a, b, q, r)
    return np.asarray(-np.linalg.solve(r + b.T @ p @ b, b.T @ p @ a))


def by_library(a: Floats, b: Floats, q: Floats, r: Floats) -> Floats:
    """The same from the control library, which writes u = −K x."""
    return -np.asarray(control.dlqr(a, b, q, r)[0])


ROUTES = {"riccati": by_riccati, "library": by_library}


@pytest.mark.parametrize("route", sorted(ROUTES))
def test_priced_inputs(route: str) -> None:
    """Zones with priced temperatures and heaters: gain within 1e-6 after 60 steps."""
    network = zones(grid(2, 3), np.random.default_rng(0))
    quantities = [
        Quantity(q.name, q.section, q.of, q.mix, price=1.0 if q.of is Of.STATE else 0.4) for q in everything(network)
    ]
    table = RowTable.build(network, quantities, 60)
    law = unlimited_law(table, table.data())
    a, b = network.a.toarray(), network.b.toarray()
    gain = ROUTES[route](a, b, np.eye(6), 0.4 * np.eye(6))
    np.testing.assert_allclose(law[:, :6], gain, rtol=0, atol=1e-6)
    radius = np.abs(np.linalg.eigvals(a + b @ gain)).max()
    assert closed_loop_radius(table, table.data()) == pytest.approx(radius, abs=1e-6)


@pytest.mark.parametrize("route", sorted(ROUTES))
def test_priced_moves(route: str) -> None:
    """Tanks with priced levels and moves: gain on state and last input within 1e-6 of span after 120 steps."""
    network = tanks(row(3), np.random.default_rng(1))
    table = RowTable.build(network, unlimited(tank_quantities(network)), 120)
    law = unlimited_law(table, table.data())
    a, b, c = network.a.toarray(), network.b.toarray(), network.c.toarray()
    wide_a = np.block([[a, b], [np.zeros((3, 6)), np.eye(3)]])
    wide_b = np.vstack([b, np.eye(3)])
    price_y, price_move = np.eye(3) / 40**2, 0.3 * np.eye(3) / 100**2
    scale = 100.0**2
    gain = ROUTES[route](wide_a, wide_b, scale * block_diag(c.T @ price_y @ c, np.zeros((3, 3))), scale * price_move)
    expected = gain + np.hstack([np.zeros((3, 6)), np.eye(3)])
    found = np.hstack([law[:, :6], law[:, 9:]])
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-6)


def test_the_localized_iteration_plans_the_regulator_s_input() -> None:
    """Run to the end without limits, the localized synthesis itself gives K x, to 1e-6 of span."""
    network = zones(row(4), np.random.default_rng(2))
    quantities = [Quantity(q.name, q.section, q.of, q.mix, price=1.0) for q in everything(network)]
    design = Design.build(
        network,
        quantities,
        horizon=40,
        locality=1,
        settings=Settings(rho=2.0, tolerance_spans=1e-10, max_iterations=5000, chunk=20),
    )
    measured = anywhere(network, np.random.default_rng(3))
    at_rest = type(measured)(measured.x, np.zeros(4), np.zeros(4))
    gain = by_riccati(network.a.toarray(), network.b.toarray(), np.eye(4), np.eye(4))
    np.testing.assert_allclose(design.solve(at_rest)[0].inputs, gain @ measured.x, rtol=0, atol=1e-6)
