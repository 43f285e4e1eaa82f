"""Laws of the transmitters: lag, noise, resolution, saturation, and what a seed means."""

from __future__ import annotations

from math import exp

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_plant.instruments import Floats, Instrument, Instruments
from sim_plant.status import ENGINEERING_UNITS_EXCEEDED, GOOD

SPAN = (0.0, 40.0)


def bank(*instruments: Instrument, seed: int = 1, step_s: float = 0.1) -> Instruments:
    """Transmitters of one span."""
    return Instruments(instruments, [SPAN] * len(instruments), seed, step_s)


def readings(instruments: Instruments, truths: list[list[float]], start: list[float]) -> Floats:
    """Readings, one row for each truth."""
    state = instruments.start(np.array(start))
    rows = []
    for truth in truths:
        state, values, _ = instruments.sample(state, np.array(truth))
        rows.append(values)
    return np.array(rows)


@given(st.floats(0.0, 40.0))
def test_ideal_transmitter_shows_the_truth(truth: float) -> None:
    """No noise, no lag, no resolution: the very number."""
    assert readings(bank(Instrument()), [[truth]], [3.0])[0, 0] == truth


@given(st.floats(0.01, 10.0), st.integers(1, 40))
def test_lag_is_first_order(lag_s: float, steps: int) -> None:
    """A step from 10 to 20 is followed as 20 − 10 exp(−t/τ), exactly, at every sample."""
    shown = readings(bank(Instrument(lag_s=lag_s)), [[20.0]] * steps, [10.0])
    assert shown[-1, 0] == pytest.approx(20.0 - 10.0 * exp(-steps * 0.1 / lag_s), abs=1e-9)


@given(st.floats(0.0, 40.0), st.sampled_from([0.01, 0.1, 0.5, 2.0]))
def test_resolution_rounds_to_the_nearest_step(truth: float, resolution: float) -> None:
    """Whole steps, at most half a step away."""
    shown = readings(bank(Instrument(resolution=resolution)), [[truth]], [truth])[0, 0]
    assert shown / resolution == pytest.approx(round(shown / resolution), abs=1e-6)
    assert abs(shown - truth) <= resolution / 2 + 1e-9


def test_noise_has_its_standard_deviation_and_no_mean() -> None:
    """Over 20,000 samples, within five standard errors."""
    noise = readings(bank(Instrument(noise=0.2)), [[20.0]] * 20_000, [20.0])[:, 0] - 20.0
    assert abs(noise.mean()) < 5 * 0.2 / 20_000**0.5
    assert abs(noise.std() - 0.2) < 5 * 0.2 / (2 * 20_000) ** 0.5


def test_noise_is_white_and_independent_between_transmitters() -> None:
    """Neither the last sample nor the neighbour tells anything, within five standard errors."""
    noise = readings(bank(*[Instrument(noise=1.0)] * 2), [[20.0, 20.0]] * 20_000, [20.0, 20.0])
    limit = 5 / 20_000**0.5
    assert abs(np.corrcoef(noise[1:, 0], noise[:-1, 0])[0, 1]) < limit
    assert abs(np.corrcoef(noise[:, 0], noise[:, 1])[0, 1]) < limit


def test_same_seed_same_readings() -> None:
    """And another seed, others."""
    truths = [[20.0]] * 50
    first = readings(bank(Instrument(noise=0.2), seed=5), truths, [20.0])
    assert np.array_equal(first, readings(bank(Instrument(noise=0.2), seed=5), truths, [20.0]))
    assert not np.array_equal(first, readings(bank(Instrument(noise=0.2), seed=6), truths, [20.0]))


def test_sampling_again_from_a_kept_state_gives_the_same() -> None:
    """The state is all there is: no hidden generator moves on."""
    instruments = bank(Instrument(noise=0.2))
    state = instruments.start(np.array([20.0]))
    one, other = (instruments.sample(state, np.array([20.0])) for _ in range(2))
    assert np.array_equal(one[1], other[1])


@pytest.mark.parametrize(
    ("truth", "shown", "status"),
    [
        (41.25, 41.25, GOOD),
        (41.26, 41.25, ENGINEERING_UNITS_EXCEEDED),
        (-0.5, -0.5, GOOD),
        (-0.51, -0.5, ENGINEERING_UNITS_EXCEEDED),
        (1e9, 41.25, ENGINEERING_UNITS_EXCEEDED),
    ],
)
def test_saturation_at_3_8_and_20_5_milliampere(truth: float, shown: float, status: int) -> None:
    """Outside, the limit with an uncertain status (NAMUR NE 43: 3.8 mA is −1.25 %, 20.5 mA is 103.125 % of span)."""
    instruments = bank(Instrument())
    _, values, codes = instruments.sample(instruments.start(np.array([20.0])), np.array([truth]))
    assert values[0] == pytest.approx(shown, abs=1e-12)
    assert codes[0] == status


@pytest.mark.parametrize("field", ["noise", "resolution", "lag_s"])
@pytest.mark.parametrize("value", [-1.0, float("nan"), float("inf")])
def test_numbers_that_mean_nothing_are_refused(field: str, value: float) -> None:
    """By the name of the field."""
    with pytest.raises(ValueError, match=f"instrument {field}="):
        Instrument(**{field: value})


def test_one_span_for_each_instrument() -> None:
    """Else the arrays would be of different lengths."""
    with pytest.raises(ValueError, match="1 instruments, 2 spans"):
        Instruments([Instrument()], [SPAN, SPAN], 1, 0.1)
