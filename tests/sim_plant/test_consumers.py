"""Laws of the consumers: two levels, exponential dwells, a seed's own day."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_plant.consumers import Consumer, Profile

PROFILE = Profile(low=1.0, high=8.0, mean_low_s=30.0, mean_high_s=20.0)


def dwells_s(consumer: Consumer, count: int) -> list[float]:
    """Lengths of its first dwells."""
    state, since_s, lengths = consumer.start(), 0.0, []
    for _ in range(count):
        lengths.append(state.until_s - since_s)
        since_s = state.until_s
        state = consumer.after(state, since_s)
    return lengths


def test_starts_low_and_alternates() -> None:
    """Never the same level twice in a row."""
    consumer = Consumer(PROFILE, seed=1, index=0)
    state, values = consumer.start(), []
    for _ in range(6):
        values.append(consumer.value(state))
        state = consumer.after(state, state.until_s)
    assert values == [1.0, 8.0] * 3


def test_dwells_are_exponential() -> None:
    """Mean and standard deviation of 4,000 dwells at each level are the given mean, within five standard errors."""
    lengths = np.array(dwells_s(Consumer(PROFILE, seed=3, index=0), 8000))
    for level, mean_s in ((lengths[::2], 30.0), (lengths[1::2], 20.0)):
        assert abs(level.mean() - mean_s) < 5 * mean_s / 4000**0.5
        assert abs(level.std() - mean_s) < 5 * mean_s * (2 / 4000) ** 0.5


@given(st.floats(0.0, 500.0), st.floats(0.0, 500.0))
def test_the_way_there_does_not_matter(first_s: float, second_s: float) -> None:
    """Law: after(a) then after(a + b) is after(a + b)."""
    consumer = Consumer(PROFILE, seed=2, index=1)
    at_once = consumer.after(consumer.start(), first_s + second_s)
    in_two = consumer.after(consumer.after(consumer.start(), first_s), first_s + second_s)
    assert in_two == at_once


def test_seed_and_index_choose_the_day() -> None:
    """Two consumers of one plant don't switch together, and another seed is another day."""
    days = {tuple(dwells_s(Consumer(PROFILE, seed, index), 3)) for seed in (1, 2) for index in (0, 1)}
    assert len(days) == 4
    assert dwells_s(Consumer(PROFILE, 1, 0), 3) == dwells_s(Consumer(PROFILE, 1, 0), 3)


@pytest.mark.parametrize("field", ["mean_low_s", "mean_high_s"])
@pytest.mark.parametrize("value", [0.0, -1.0, float("inf"), float("nan")])
def test_means_must_be_positive(field: str, value: float) -> None:
    """A consumer that switches without end would never let time go on."""
    with pytest.raises(ValueError, match=f"profile {field}="):
        Profile(**{"low": 0.0, "high": 1.0, "mean_low_s": 1.0, "mean_high_s": 1.0, field: value})


def test_seed_out_of_range() -> None:
    """Named with its range."""
    with pytest.raises(ValueError, match="seed=-1: must be a whole number"):
        Consumer(PROFILE, seed=-1, index=0).start()
