"""Waits between attempts."""

from __future__ import annotations

import random

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.links.backoff import Backoff


@given(attempt=st.integers(1, 10**6), seed=st.integers(0, 2**32))
def test_a_wait_is_bounded_and_at_least_half_its_nominal(attempt: int, seed: int) -> None:
    """However long a peer is gone, the wait neither vanishes nor passes the ceiling."""
    backoff = Backoff(first_s=0.25, ceiling_s=5.0)
    nominal = min(5.0, 0.25 * 2.0 ** min(attempt - 1, 60))
    assert nominal / 2 <= backoff.delay_s(attempt, random.Random(seed)) <= nominal


def test_two_clients_wait_differently() -> None:
    """Jitter keeps clients that were lost together from coming back together."""
    backoff = Backoff()
    waits = {backoff.delay_s(1, random.Random(seed)) for seed in range(20)}
    assert len(waits) == 20


def test_the_same_seed_waits_alike() -> None:
    """A replayed run retries at the same instants."""
    backoff = Backoff()
    one, other = random.Random(3), random.Random(3)
    assert [backoff.delay_s(n, one) for n in range(1, 9)] == [backoff.delay_s(n, other) for n in range(1, 9)]


@pytest.mark.parametrize(("first_s", "ceiling_s"), [(0.0, 1.0), (-1.0, 1.0), (2.0, 1.0)])
def test_impossible_waits_are_refused(first_s: float, ceiling_s: float) -> None:
    """No wait at all would hammer the peer."""
    with pytest.raises(ValueError, match="want 0 < first_s <= ceiling_s"):
        Backoff(first_s, ceiling_s)
