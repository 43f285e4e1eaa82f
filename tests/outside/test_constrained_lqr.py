"""Check 5: the double-state example of a published explicit regulator.

Bemporad, Morari, Dua, Pistikopoulos, "The explicit linear quadratic regulator for constrained systems", Automatica 38
(2002) 3-20: abs(u) <= 2, Q = I, R = 0.01, horizon 2, terminal weight P from the Lyapunov equation P = A'PA + Q. The
gain of the central region was written down from memory; two steps of the Riccati recursion, and the least squares of
the same two steps, confirm it here before it is asserted.
"""

import numpy as np
import pytest
from scipy import sparse
from scipy.linalg import cholesky, solve_discrete_lyapunov

from controllers.arrays import Floats
from controllers.network import Network
from controllers.plans import Measured, Settings
from controllers.quantities import Of, Quantity
from controllers.row_rule import Region
from controllers.synthesis import Design
from tests.controllers.solvers import SOLVERS, Program

A = np.array([[0.7326, -0.0861], [0.1722, 0.9909]])
B = np.array([[0.0609], [0.0064]])
Q, R, LIMIT = np.eye(2), 0.01, 2.0
P: Floats = solve_discrete_lyapunov(A.T, Q)
PUBLISHED_GAIN = np.array([-6.8355, -6.8585])
GRID = [np.array([one, other]) for one in np.linspace(-1.5, 1.5, 17) for other in np.linspace(-1.5, 1.5, 17)]


@pytest.fixture(scope="module")
def design() -> Design:
    """The example as a plant of one section; x'Px is two mixes of a Cholesky factor, priced at the last step only."""
    network = Network.from_matrices(A, B, states={"double": 2})
    factor = cholesky(P)
    quantities = [
        *(Quantity(f"x{k}", "double", Of.STATE, tuple(np.eye(2)[k]), price=(1.0, 0.0)) for k in range(2)),
        *(Quantity(f"end{k}", "double", Of.STATE, tuple(factor[k]), price=(0.0, 1.0)) for k in range(2)),
        Quantity("u", "double", Of.INPUT, price=R, hard=(-LIMIT, LIMIT)),
    ]
    settings = Settings(rho=0.05, tolerance_spans=1e-11, max_iterations=100_000, chunk=100)
    return Design.build(network, quantities, horizon=2, locality=0, settings=settings)


def first_input(design: Design, x: Floats) -> float:
    """What the synthesis plans at x."""
    return float(design.solve(Measured(x, np.zeros(0), np.zeros(1)))[0].inputs[0])


def program(x: Floats) -> Program:
    """The example's condensed program in (u_0, u_1), by hand from its cost."""
    free, forced = np.vstack([A, A @ A]) @ x, np.block([[B, np.zeros((2, 1))], [A @ B, B]])
    weight = np.block([[Q, np.zeros((2, 2))], [np.zeros((2, 2)), P]])
    return Program(
        p=sparse.csc_matrix(2 * (forced.T @ weight @ forced + R * np.eye(2))),
        g=2 * forced.T @ weight @ free,
        k=sparse.csc_matrix(np.eye(2)),
        lower=np.full(2, -LIMIT),
        upper=np.full(2, LIMIT),
    )


def test_the_published_gain_follows_from_the_problem() -> None:
    """Second routes to the remembered value: two Riccati steps back from P, and least squares over both inputs."""
    p = P
    for _ in range(2):
        gain = -np.linalg.solve(R + B.T @ p @ B, B.T @ p @ A)
        p = Q + A.T @ p @ (A + B @ gain)
    np.testing.assert_allclose(gain[0], PUBLISHED_GAIN, rtol=0, atol=5e-5)
    unit = [np.linalg.solve(program(x).p.toarray(), -program(x).g)[0] for x in np.eye(2)]
    np.testing.assert_allclose(unit, PUBLISHED_GAIN, rtol=0, atol=5e-5)


def test_the_central_region_has_the_published_gain(design: Design) -> None:
    """Near the origin no limit binds, and the planned input is the published linear law."""
    found = [first_input(design, x) / 0.1 for x in 0.1 * np.eye(2)]
    np.testing.assert_allclose(found, PUBLISHED_GAIN, rtol=0, atol=5e-5)


@pytest.mark.parametrize("solver", sorted(SOLVERS))
def test_the_whole_map_agrees_with_a_solver(design: Design, solver: str) -> None:
    """On a grid of states, in the central, the partly and the fully saturated regions, to 1e-6."""
    for x in GRID:
        assert first_input(design, x) == pytest.approx(SOLVERS[solver](program(x))[0], abs=1e-6)


def test_the_grid_meets_every_kind_of_region(design: Design) -> None:
    """No limit, the first input's, and both inputs' at work, on either side: all five sets of active limits occur."""
    rows = design.table.rows_of("u")
    found: dict[tuple[Region, bool], int] = {}
    for x in GRID:
        plan, _ = design.solve(Measured(x, np.zeros(0), np.zeros(1)))
        first, second = plan.rows[rows]
        key = (plan.region[0], bool(abs(second) > LIMIT - 1e-9))
        found[key] = found.get(key, 0) + 1
        assert (abs(first) == LIMIT) == (plan.region[0] is not Region.FREE)
    low, high = Region.LOWER, Region.UPPER
    assert set(found) == {(Region.FREE, False), (low, False), (low, True), (high, False), (high, True)}
    assert min(found.values()) >= 3
