"""Tests of `controllers.row_rule`; two solvers check the same rule in tests/outside/test_row_rule.py."""

from dataclasses import replace
from math import inf

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from controllers.arrays import Floats
from controllers.row_rule import row_rule
from controllers.rows import RowData
from tests.controllers.random_rows import random_rows


def per_row(z: Floats, a: Floats, penalty: Floats, data: RowData) -> Floats:
    """f_r(z) + (p/2)(z − a)² of every row."""
    outside = np.maximum(data.soft_lower - z, 0) + np.maximum(z - data.soft_upper, 0)
    return np.asarray(data.price * (z - data.target) ** 2 + data.soft_price * outside**2 + penalty / 2 * (z - a) ** 2)


@given(st.integers(0, 100_000))
def test_no_value_within_the_limits_is_cheaper(seed: int) -> None:
    """The row rule obeys the limits exactly, and no other allowed value of any row costs less."""
    rng = np.random.default_rng(seed)
    a, penalty, data = random_rows(rng, 200)
    z = row_rule(a, penalty, data)
    assert (z >= data.lower).all()
    assert (z <= data.upper).all()
    best = per_row(z, a, penalty, data)
    for step in (-1.0, -1e-3, -1e-6, 1e-6, 1e-3, 1.0):
        other = np.clip(z + step, data.lower, data.upper)
        assert (per_row(other, a, penalty, data) >= best - 1e-13 * (1 + np.abs(best))).all()


@given(st.integers(0, 100_000))
def test_the_rule_is_monotone_and_never_stretches(seed: int) -> None:
    """A proximal map is firmly nonexpansive: 0 <= (z − z')(a − a') and |z − z'| <= |a − a'| for every row."""
    rng = np.random.default_rng(seed)
    a, penalty, data = random_rows(rng, 200)
    other = a + rng.normal(0, 1, 200)
    difference = row_rule(a, penalty, data) - row_rule(other, penalty, data)
    assert (difference * (a - other) >= -1e-14).all()
    assert (np.abs(difference) <= np.abs(a - other) + 1e-14).all()


def test_a_row_without_cost_and_limit_stays_where_it_is_pulled() -> None:
    """With nothing to say, the rule returns a; with equal limits, that value, bit for bit."""
    a, penalty, data = random_rows(np.random.default_rng(1), 50)
    none = np.full(50, inf)
    free = RowData(0 * a, a, 0 * a, -none, none, -none, none)
    np.testing.assert_allclose(row_rule(a, penalty, free), a, rtol=1e-15)
    held = replace(data, lower=data.target, upper=data.target)
    assert (row_rule(a, penalty, held) == data.target).all()


def test_a_band_of_no_width_is_a_second_target() -> None:
    """With a = b the rule is the weighted mean of target, band and pull, from either side."""
    data = RowData(*(np.array([value, value]) for value in (1.0, 0.0, 2.0, 1.0, 1.0, -inf, inf)))
    pulled = np.array([5.0, -5.0])
    np.testing.assert_allclose(row_rule(pulled, np.array([2.0, 2.0]), data), (2 * pulled + 4 * 1.0) / (2 + 2 + 4))
