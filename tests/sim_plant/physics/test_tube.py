"""What a tube does: proportional, symmetric, and honest about where its law ends."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.sim_plant.rigs import TUBE

HEADS = st.integers(0, 400_000).map(lambda micrometres: micrometres * 1e-6)


@given(one=HEADS, other=HEADS)
def test_exchanged_ends_reverse_the_flow(one: float, other: float) -> None:
    """What leaves one end enters the other: exactly the negative."""
    assert TUBE.flow(np.array(one), np.array(other)) == -TUBE.flow(np.array(other), np.array(one))


@given(one=HEADS, other=HEADS)
def test_flow_runs_down(one: float, other: float) -> None:
    """Never toward the higher head, and none between equal ones."""
    assert np.sign(TUBE.flow(np.array(one), np.array(other))) == np.sign(one - other)


def test_demo_tube_carries_what_the_scenario_says() -> None:
    """3 mm by 300 mm carries 0.65 cm³/s per centimetre and is laminar up to about 8 cm (our own scenario)."""
    assert TUBE.conductance * 1e4 == pytest.approx(0.65, abs=0.005)
    assert TUBE.laminar_limit_m == pytest.approx(0.08, abs=0.005)


def test_law_ends_at_its_reynolds_number() -> None:
    """The flow at the limit has Re = 2300, and only beyond it does the tube say that its law is left."""
    limit = TUBE.laminar_limit_m
    zero = np.zeros(2)
    heads = np.array([0.999, 1.001]) * limit
    assert TUBE.reynolds(TUBE.flow(np.array(limit), np.array(0.0))) == pytest.approx(2300.0)
    assert TUBE.in_range(heads, zero).tolist() == [True, False]
    assert TUBE.in_range(zero, heads).tolist() == [True, False]


def test_reynolds_number_has_no_direction() -> None:
    """Flow back is as turbulent as flow forth."""
    assert TUBE.reynolds(np.array(-2e-6)) == TUBE.reynolds(np.array(2e-6)) > 0
