"""Tests of `controllers.kernels`: the compiled loops against the same formulas in plain numpy."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from controllers import kernels
from controllers.arrays import Floats, Ints
from controllers.row_rule import row_rule
from tests.controllers.random_rows import random_rows

Contributions = list[tuple[Ints, Floats]]


def contributions(rng: np.random.Generator, rows: int) -> Contributions:
    """Random rows touched and orthonormal bases, some without freedom; every row is touched at least once."""
    everybody = (np.arange(rows), np.linalg.qr(rng.normal(size=(rows, 3)))[0])
    out = [everybody]
    for _ in range(int(rng.integers(1, 5))):
        touched = np.sort(rng.choice(rows, size=int(rng.integers(2, rows + 1)), replace=False))
        freedom = int(rng.integers(0, len(touched)))
        out.append((touched, np.linalg.qr(rng.normal(size=(len(touched), freedom)))[0]))
    return out


def flat(parts: Contributions) -> tuple[Ints, Ints, Floats, Ints, Ints]:
    """Side by side, as the kernels read them."""
    sizes = [basis.size for _, basis in parts]
    return (
        np.concatenate([touched for touched, _ in parts]),
        np.concatenate([[0], np.cumsum([len(touched) for touched, _ in parts])]),
        np.concatenate([basis.reshape(-1) for _, basis in parts]),
        np.concatenate([[0], np.cumsum(sizes[:-1])]).astype(np.int64),
        np.array([basis.shape[1] for _, basis in parts]),
    )


def plain_project(parts: Contributions, source: Floats) -> Floats:
    """G source, contribution by contribution."""
    out = np.zeros_like(source)
    for touched, basis in parts:
        out[touched] += basis @ (basis.T @ source[touched])
    return out


@given(st.integers(0, 100_000))
def test_project_is_the_sum_of_the_projections(seed: int) -> None:
    """G source = sum_i S_i' N_i N_i' S_i source, whatever stood in the output before."""
    rng = np.random.default_rng(seed)
    parts = contributions(rng, 12)
    source, out = rng.normal(size=12), np.full(12, np.nan)
    kernels.project(source, out, *flat(parts))
    np.testing.assert_allclose(out, plain_project(parts, source), rtol=1e-13, atol=1e-13)


def test_one_contribution_projects_twice_as_once() -> None:
    """With a single orthonormal basis G is a projection: G G = G."""
    rng = np.random.default_rng(0)
    part = flat([(np.arange(9), np.linalg.qr(rng.normal(size=(9, 4)))[0])])
    once, twice = np.empty(9), np.empty(9)
    kernels.project(rng.normal(size=9), once, *part)
    kernels.project(once, twice, *part)
    np.testing.assert_allclose(twice, once, rtol=1e-13, atol=1e-14)


@given(st.integers(0, 100_000), st.integers(0, 6), st.sampled_from([1.0, 1.3, 1.6, 1.9]))
def test_iterate_runs_the_passes_of_the_iteration(seed: int, count: int, relax: float) -> None:
    """`count` passes equal (4) with the row rule in plain numpy, the first with its own relaxation."""
    rng = np.random.default_rng(seed)
    parts = contributions(rng, 12)
    _, _, data = random_rows(rng, 12)
    copies = np.bincount(flat(parts)[0], minlength=12).astype(float)
    rho = float(rng.uniform(0.1, 2.0))
    z, y, l = np.zeros(12), rng.normal(size=12), rng.normal(size=12)  # noqa: E741
    found_z, found_y, found_l, alpha, change = z.copy(), y.copy(), l.copy(), np.empty(12), np.zeros(12)
    kernels.iterate(
        count, 1.0, relax, found_z, found_y, found_l, alpha, change, copies, rho / copies,
        data.price, data.target, data.soft_price, data.soft_lower, data.soft_upper, data.lower, data.upper,
        *flat(parts),
    )  # fmt: skip
    g = np.zeros(12)
    for k in range(count):
        along = 1.0 if k == 0 else relax
        a = y - l
        z = row_rule(a, rho / copies, data)
        step = along * (z - a) / copies
        g = plain_project(parts, step)
        y = y + g
        l = (1 - along) * l + copies * step - g  # noqa: E741
    for found, expected in ((found_z, z), (found_y, y), (found_l, l), (change, g)):
        np.testing.assert_allclose(found, expected, rtol=1e-11, atol=1e-12)
