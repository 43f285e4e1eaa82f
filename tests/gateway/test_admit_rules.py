"""Tests of `gateway.admit_rules`: the formula of a freeze, the allowances, the plan."""

from math import erfc, sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.stats import norm

from gateway.admit_rules import (
    DEFAULTS,
    JUMP_SIGMAS,
    LEAST_READINGS,
    MOST_READINGS,
    plan_admission,
    readings_until_frozen,
)
from tests.gateway.plants import row_of_tanks


def chance_of_equal(noise: float, resolution: float, readings: int, offset: float) -> float:
    """Probability that so many quantised readings of a constant are equal: sum over steps of p^n, by scipy."""
    steps = np.arange(-int(9 * noise / resolution) - 2, int(9 * noise / resolution) + 3)
    edges = (steps[:, None] + np.array([-0.5, 0.5]) - offset) * resolution / noise
    return float(np.sum((norm.cdf(edges[:, 1]) - norm.cdf(edges[:, 0])) ** readings))


@pytest.mark.parametrize("noise_in_steps", [0.6, 1.0, 2.0, 4.0, 20.0, 100.0])
@pytest.mark.parametrize("offset", [0.0, 0.2, 0.5])
def test_false_alarms_are_as_rare_as_promised(noise_in_steps: float, offset: float) -> None:
    """The exact probability of n equal readings stays below one in ten million, wherever the truth lies in its step."""
    readings = readings_until_frozen(noise_in_steps, 1.0)
    assert readings is not None
    assert chance_of_equal(noise_in_steps, 1.0, readings, offset) <= 1e-7


@pytest.mark.parametrize("noise_in_steps", [0.6, 1.0, 2.0, 4.0, 20.0, 100.0])
def test_no_more_than_two_readings_are_given_away(noise_in_steps: float) -> None:
    """The bound is close: two readings fewer would break the promise."""
    readings = readings_until_frozen(noise_in_steps, 1.0)
    assert readings is not None
    assert readings == LEAST_READINGS or chance_of_equal(noise_in_steps, 1.0, readings - 2, 0.0) > 1e-7


def test_false_alarms_happen_as_often_as_computed() -> None:
    """At a rate high enough to count, runs of n equal quantised readings are no more frequent than α."""
    rng = np.random.default_rng(7)
    alpha = 1e-3
    readings = readings_until_frozen(1.0, 0.5, alpha)
    assert readings is not None
    values = np.round(rng.normal(size=400_000) / 0.5)
    same = np.lib.stride_tricks.sliding_window_view(values, readings)
    rate = float(np.mean(np.all(same == same[:, :1], axis=1)))
    assert alpha / 100 < rate <= alpha


def test_tarn_row_values() -> None:
    """0.02 cm of noise at 0.005 cm resolution: eight readings; at 0.001 cm: six; unquantised: three."""
    assert readings_until_frozen(0.02, 0.005) == 8
    assert readings_until_frozen(0.02, 0.001) == 6
    assert readings_until_frozen(0.02, 0.0) == LEAST_READINGS


@pytest.mark.parametrize(("noise", "resolution"), [(0.0, 0.005), (0.001, 0.005), (1e-9, 1.0)])
def test_noise_that_says_little_gives_no_number(noise: float, resolution: float) -> None:
    """Without noise, or with a resolution far coarser than it, repeats prove nothing."""
    assert readings_until_frozen(noise, resolution) is None


@pytest.mark.parametrize(
    ("noise", "resolution", "alpha", "field"),
    [
        (-1.0, 0.1, 1e-7, "noise"),
        (float("nan"), 0.1, 1e-7, "noise"),
        (1.0, -0.1, 1e-7, "resolution"),
        (1.0, float("inf"), 1e-7, "resolution"),
        (1.0, 0.1, 0.0, "false_alarm"),
        (1.0, 0.1, 1.0, "false_alarm"),
    ],
)
def test_arguments_outside_their_range_are_named(noise: float, resolution: float, alpha: float, field: str) -> None:
    """Misuse names the argument."""
    with pytest.raises(ValueError, match=f"^{field} = "):
        readings_until_frozen(noise, resolution, alpha)


@given(noise=st.floats(1e-3, 1e3), fine=st.floats(0, 10), coarse=st.floats(0, 10))
def test_a_coarser_resolution_never_needs_fewer_readings(noise: float, fine: float, coarse: float) -> None:
    """Not knowing the resolution well enough errs towards patience."""
    fine, coarse = sorted((fine, coarse))
    few, many = readings_until_frozen(noise, fine), readings_until_frozen(noise, coarse)
    assert (few or MOST_READINGS + 1) <= (many or MOST_READINGS + 1)


def test_jump_margin_is_as_rare_as_promised() -> None:
    """Two readings of a constant differ by more than the margin less often than once in ten million."""
    assert erfc(JUMP_SIGMAS / sqrt(2) / sqrt(2)) < 1e-7


def test_the_span_margins_are_the_current_loop_limits() -> None:
    """3.8 and 20.5 mA on 4..20 mA (NAMUR NE 43)."""
    assert (4 - DEFAULTS.below_span * 16, 20 + DEFAULTS.above_span * 16) == pytest.approx((3.8, 20.5))


def test_plan_orders_measured_before_disturbances() -> None:
    """All levels first, then the measured consumer; unmeasured and driven signals are not admitted."""
    plan = plan_admission(row_of_tanks(3))
    assert [rule.tag for rule in plan.rules] == ["tank-1.level", "tank-2.level", "tank-3.level", "tank-2.consumer"]
    assert [rule.sees for rule in plan.rules] == [True, True, True, False]


def test_plan_knows_the_neighbours() -> None:
    """A level moves along with the levels next to it; a disturbance comes from outside and has no neighbours."""
    plan = plan_admission(row_of_tanks(3))
    assert [rule.neighbours for rule in plan.rules] == [(1,), (0, 2), (1,), ()]


def test_plan_turns_rates_into_periods() -> None:
    """4 cm/s are 2 cm in half a second, with the noise of two readings and one step on top."""
    rule = plan_admission(row_of_tanks(1)).rules[0]
    assert rule.jump_per_period == 2.0
    assert rule.jump_margin == pytest.approx(7.6 * 0.02 + 0.005)
    assert (rule.low, rule.high) == (-0.5, 41.25)


def test_nothing_resolves_better_than_its_converter() -> None:
    """An undeclared resolution is taken as 16 bits of the span."""
    rule = plan_admission(row_of_tanks(2)).rules[-1]
    assert rule.tag == "tank-2.consumer"
    assert rule.resolution == 20 / 65536
