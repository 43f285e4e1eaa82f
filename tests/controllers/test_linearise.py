"""Tests of `controllers.linearise`."""

from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp
from scipy import sparse
from scipy.linalg import expm

from controllers.arrays import Floats
from controllers.exceptions import EquilibriumError
from controllers.linearise import (
    OperatingPoint,
    colour_columns,
    discretise,
    equilibrium,
    held_coupling_error,
    jacobian,
)
from controllers.network import offsets

AnyArray = npt.NDArray[Any]
AREA, OUTLET, TUBE = 40.0, 7.7, 0.65


def draining(x: AnyArray, u: AnyArray, w: AnyArray) -> AnyArray:
    """Levels (cm) of tanks in a row: pumped in u, drawn w (cm3/s), through a square-root outlet and linear tubes."""
    between = TUBE * np.diff(x)
    flow = u - w - OUTLET * np.sqrt(x)
    return np.asarray((flow + np.concatenate([between, [0.0]]) - np.concatenate([[0.0], between])) / AREA)


def draining_slope(x: Floats) -> Floats:
    """d(dx/dt)/dx of `draining`, by hand."""
    size = len(x)
    neighbours = np.full(size, 2.0)
    neighbours[[0, -1]] -= 1.0
    slope = np.diag(-OUTLET / (2 * np.sqrt(x)) - TUBE * neighbours)
    return (slope + TUBE * (np.eye(size, k=1) + np.eye(size, k=-1))) / AREA


def tridiagonal(size: int) -> sparse.csr_array:
    """Pattern of `draining`."""
    return sparse.csr_array(np.eye(size) + np.eye(size, k=1) + np.eye(size, k=-1))


patterns = hnp.arrays(
    np.float64, st.tuples(st.integers(1, 8), st.integers(1, 8)), elements=st.sampled_from([0, 0, 1, -1])
)


@given(hnp.arrays(np.float64, st.integers(2, 12), elements=st.floats(1.0, 40.0)))
def test_complex_steps_equal_the_derivative_by_hand(x: Floats) -> None:
    """The Jacobian is exact to rounding, with far fewer evaluations than columns."""
    pattern = tridiagonal(len(x))
    found = jacobian(lambda v: draining(v, 0 * v, 0 * v), x, colour_columns(pattern), pattern)
    np.testing.assert_allclose(found.toarray(), draining_slope(x), rtol=1e-14, atol=1e-16)


@given(patterns, st.integers(0, 1000))
def test_colours_never_mix_columns(pattern: Floats, seed: int) -> None:
    """For any sparsity, a function that uses all of it gets exactly its own Jacobian back."""
    rng = np.random.default_rng(seed)
    slope = pattern * rng.uniform(0.5, 2.0, pattern.shape)
    filled = sparse.csr_array(pattern)
    at = np.asarray(rng.normal(size=pattern.shape[1]))
    found = jacobian(lambda v: slope @ np.sin(v), at, colour_columns(filled), filled)
    np.testing.assert_allclose(found.toarray(), slope * np.cos(at), rtol=1e-13, atol=1e-300)


@given(patterns)
def test_columns_that_share_a_row_differ_in_colour(pattern: Floats) -> None:
    """Colours are proper even when the pattern's values would cancel in a product, and no more than needed greedily."""
    colours = colour_columns(sparse.csr_array(pattern))
    shared = (pattern != 0).astype(int).T @ (pattern != 0).astype(int) > 0
    one, other = np.nonzero(np.triu(shared, k=1))
    assert (colours[one] != colours[other]).all()
    assert colours.max() <= shared.sum(axis=1).max()
    assert colours.min() >= 0


def test_a_row_of_any_length_takes_three_evaluations() -> None:
    """A tridiagonal pattern has three colours, however long it is."""
    assert colour_columns(tridiagonal(50)).max() == 2


@given(hnp.arrays(np.float64, st.integers(2, 6), elements=st.floats(10.0, 30.0)), st.booleans())
def test_equilibrium_puts_every_output_at_its_target(levels: Floats, sparse_pattern: bool) -> None:
    """Newton's method finds the inputs by which the plant rests at the targets, with and without a sparsity pattern."""
    size = len(levels)
    drawn = np.linspace(0.0, 3.0, size)
    start = OperatingPoint(np.full(size, 20.0), np.full(size, 30.0), drawn)
    pattern = sparse.csr_array(
        sparse.block_array([[tridiagonal(size), sparse.eye_array(size)], [sparse.eye_array(size), None]])
    )
    found = equilibrium(
        draining,
        lambda x: x,
        levels,
        start,
        scale=np.ones(size),
        pattern=pattern if sparse_pattern else None,
    )
    np.testing.assert_allclose(found.x, levels, atol=1e-9)
    np.testing.assert_allclose(draining(found.x, found.u, drawn), 0.0, atol=1e-9)
    assert (found.w == drawn).all()


def test_outputs_without_a_target_are_left_alone() -> None:
    """NaN means no target: the plant then rests wherever is nearest, the aimed outputs still at theirs."""
    start = OperatingPoint(np.full(3, 20.0), np.full(3, 30.0), np.zeros(3))
    targets = np.array([15.0, np.nan, 18.0])
    found = equilibrium(draining, lambda x: x, targets, start, scale=np.ones(3))
    np.testing.assert_allclose(found.x[[0, 2]], [15.0, 18.0], atol=1e-8)
    np.testing.assert_allclose(draining(found.x, found.u, found.w), 0.0, atol=1e-8)


def test_a_target_out_of_reach_is_named() -> None:
    """The error says which equation is left and by how much."""
    start = OperatingPoint(np.array([1.0]), np.array([30.0]), np.zeros(1))
    with pytest.raises(EquilibriumError, match=r"output\[0\] - target is still -?\d.*check the targets"):
        equilibrium(draining, np.tanh, np.array([2.0]), start, scale=np.ones(1))


def test_a_balance_that_cannot_close_is_named() -> None:
    """When no state brings dx/dt to zero the error names that equation."""
    start = OperatingPoint(np.zeros(1), np.zeros(1), np.zeros(1))
    with pytest.raises(EquilibriumError, match=r"dx/dt\[0\] / scale is still 1"):
        equilibrium(lambda x, u, w: x * 0 + 1 + u * 0, lambda x: x, np.array([1.0]), start, scale=np.ones(1))


def test_physics_that_is_not_finite_is_an_error() -> None:
    """A guess outside the physics' range ends in an error, never in a NaN operating point."""
    start = OperatingPoint(np.array([np.nan]), np.array([30.0]), np.zeros(1))
    with pytest.raises(EquilibriumError, match="nan"):
        equilibrium(draining, lambda x: x, np.array([20.0]), start, scale=np.ones(1))


def continuous(rng: np.random.Generator, blocks: list[int]) -> sparse.csr_array:
    """A stable random A whose blocks are all coupled."""
    n = sum(blocks)
    a = rng.normal(0, 0.3, (n, n))
    return sparse.csr_array(a - 1.5 * np.eye(n))


@given(st.lists(st.integers(1, 3), min_size=1, max_size=4), st.integers(0, 1000))
def test_discretising_keeps_the_sparsity_of_sections(blocks: list[int], seed: int) -> None:
    """Sections that do not touch each other in continuous time do not in discrete time either."""
    rng = np.random.default_rng(seed)
    x_at = offsets(blocks)
    coupled = rng.random((len(blocks), len(blocks))) < 0.4
    np.fill_diagonal(coupled, True)
    mask = np.repeat(np.repeat(coupled, blocks, axis=0), blocks, axis=1)
    a = sparse.csr_array(continuous(rng, blocks).toarray() * mask)
    found = discretise(a, sparse.csr_array(mask * 1.0), sparse.csr_array(mask * 1.0), x_at, 0.3)
    for matrix in found:
        assert not matrix.toarray()[~mask].any()


def test_held_coupling_error_is_the_difference_to_the_exponential() -> None:
    """What is reported is the largest one-step difference over states of half a span either way."""
    rng = np.random.default_rng(3)
    a = continuous(rng, [2, 1, 2])
    none = sparse.csr_array((5, 0))
    discrete, _, _ = discretise(a, none, none, offsets([2, 1, 2]), 0.2)
    spans = np.array([40.0, 70.0, 10.0, 40.0, 70.0])
    found = held_coupling_error(a, discrete, 0.2, spans, samples=64)
    difference = expm(a.toarray() * 0.2) - discrete.toarray()
    worst = float((np.abs(difference) * spans / spans[:, None]).sum(axis=1).max() / 2)
    assert 0.4 * worst < found <= worst * (1 + 1e-12)
    exact = sparse.csr_array(expm(a.toarray() * 0.2))
    assert held_coupling_error(a, exact, 0.2, spans) < 1e-14
