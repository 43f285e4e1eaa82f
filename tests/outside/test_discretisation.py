"""Check 12: discretisation against SciPy's zero-order hold and the matrix exponential; order of the held couplings.

Sources: `scipy.signal.cont2discrete` and `scipy.linalg.expm`; the stacked exponential of Van Loan, IEEE TAC 23 (1978)
395-404. Holding the neighbours' states over a step leaves out the terms from Ts² on: one-step errors fall fourfold
when the step is halved.
"""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import sparse
from scipy.linalg import expm
from scipy.signal import cont2discrete

from controllers.arrays import Floats, block_diagonal
from controllers.linearise import discretise, held_coupling_error
from controllers.network import offsets


def random_section(seed: int, n: int) -> tuple[Floats, Floats, Floats]:
    """Continuous A, B, E of a section, stable or not, of time constants around a second."""
    rng = np.random.default_rng(seed)
    return rng.normal(size=(n, n)), rng.normal(size=(n, 2)), rng.normal(size=(n, 1))


def sparse_all(*matrices: Floats) -> tuple[sparse.csr_array, ...]:
    """Sparse forms."""
    return tuple(sparse.csr_array(matrix) for matrix in matrices)


@settings(max_examples=40, deadline=None, derandomize=True)
@given(st.integers(0, 10_000), st.integers(1, 5), st.floats(1e-3, 2.0))
def test_a_lone_section_is_exact(seed: int, n: int, ts_s: float) -> None:
    """A section by itself equals the zero-order hold of a signal library and the matrix exponential to 1e-12."""
    a, b, e = random_section(seed, n)
    sa, sb, se = sparse_all(a, b, e)
    found_a, found_b, found_e = discretise(sa, sb, se, offsets([n]), ts_s)
    continuous = (a, np.hstack([b, e]), np.eye(n), np.zeros((n, 3)))
    exact_a, exact_be = (np.asarray(matrix) for matrix in cont2discrete(continuous, ts_s, method="zoh")[:2])
    scale = np.abs(exact_a).max() + np.abs(exact_be).max()
    np.testing.assert_allclose(found_a.toarray(), exact_a, rtol=0, atol=1e-12 * scale)
    np.testing.assert_allclose(found_a.toarray(), expm(a * ts_s), rtol=0, atol=1e-12 * scale)
    np.testing.assert_allclose(np.hstack([found_b.toarray(), found_e.toarray()]), exact_be, rtol=0, atol=1e-12 * scale)


def test_an_integrator_is_exact() -> None:
    """A singular A, where inverting it would fail: position and speed under a held force."""
    a, b = np.array([[0.0, 1.0], [0.0, 0.0]]), np.array([[0.0], [1.0]])
    sa, sb, _ = sparse_all(a, b, b)
    found_a, found_b, _ = discretise(sa, sb, sb, offsets([2]), 0.5)
    np.testing.assert_allclose(found_a.toarray(), [[1.0, 0.5], [0.0, 1.0]], rtol=0, atol=1e-15)
    np.testing.assert_allclose(found_b.toarray(), [[0.125], [0.5]], rtol=0, atol=1e-15)


@pytest.mark.parametrize("seed", range(6))
def test_uncoupled_sections_are_exact_together(seed: int) -> None:
    """Without couplings a plant of many sections equals the exponential of the whole."""
    parts = [random_section(10 * seed + n, n)[0] for n in (1, 3, 2)]
    whole = block_diagonal(parts)
    none = sparse.csr_array((6, 0))
    found, _, _ = discretise(whole, none, none, offsets([1, 3, 2]), 0.4)
    np.testing.assert_allclose(found.toarray(), expm(whole.toarray() * 0.4), rtol=0, atol=1e-12)


@pytest.mark.parametrize("seed", range(6))
def test_a_section_is_exact_for_neighbours_that_hold_still(seed: int) -> None:
    """Every section of a network equals the zero-order hold of itself with all other states as further held inputs."""
    rng = np.random.default_rng(seed)
    a, x_at = rng.normal(0, 1, (6, 6)), offsets([2, 1, 3])
    none = sparse.csr_array((6, 0))
    found = discretise(sparse.csr_array(a), none, none, x_at, 0.7)[0].toarray()
    for lo, hi in pairwise(x_at):
        own, others = slice(int(lo), int(hi)), np.setdiff1d(np.arange(6), np.arange(lo, hi))
        n = int(hi - lo)
        continuous = (a[own, own], a[own, others], np.eye(n), np.zeros((n, len(others))))
        exact, held = (np.asarray(matrix) for matrix in cont2discrete(continuous, 0.7, method="zoh")[:2])
        np.testing.assert_allclose(found[own, own], exact, rtol=0, atol=1e-12)
        np.testing.assert_allclose(found[own, others], held, rtol=0, atol=1e-12)


@pytest.mark.parametrize("seed", range(6))
def test_held_couplings_are_of_second_order(seed: int) -> None:
    """Halving the step divides the one-step error of a coupled plant by four, measured directly and as reported."""
    rng = np.random.default_rng(seed)
    blocks = [2, 1, 2, 1]
    a = rng.normal(0, 0.5, (6, 6)) - np.eye(6)
    none = sparse.csr_array((6, 0))
    direct, reported = [], []
    for ts_s in (0.02, 0.01, 0.005):
        found, _, _ = discretise(sparse.csr_array(a), none, none, offsets(blocks), ts_s)
        direct.append(np.linalg.norm(found.toarray() - expm(a * ts_s)))
        reported.append(held_coupling_error(sparse.csr_array(a), found, ts_s, np.ones(6)))
    for errors in (direct, reported):
        assert errors[0] / errors[1] == pytest.approx(4, rel=0.05)
        assert errors[1] / errors[2] == pytest.approx(4, rel=0.03)
