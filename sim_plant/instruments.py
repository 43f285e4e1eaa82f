"""Instruments: what transmitters make of the truth.

Problem: control sees readings, not the plant. For m transmitters sampled every Δt, in engineering units:

    lag          y_f ← y + e^(−Δt/τ) (y_f − y)              exact for an input held over Δt; τ = 0: y_f = y
    noise        y_n = y_f + σ ξ,   ξ standard normal, a pure function of (seed, sample number, transmitter)
    resolution   y_r = q round(y_n / q);                    q = 0: y_r = y_n
    saturation   y_r outside [lo − 1.25 %, hi + 3.125 %] of span reads that limit, with an uncertain status

The limits of saturation are those of a 4..20 mA signal that ends at 3.8 and 20.5 mA (NAMUR NE 43, from memory; the
percentages follow from the currents).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import isfinite

import numpy as np
import numpy.typing as npt

from sim_plant.randomness import Stream, generator
from sim_plant.status import ENGINEERING_UNITS_EXCEEDED, GOOD

Floats = npt.NDArray[np.float64]
Codes = npt.NDArray[np.int64]

BELOW_SPAN = (4.0 - 3.8) / 16.0
ABOVE_SPAN = (20.5 - 20.0) / 16.0


@dataclass(frozen=True)
class Instrument:
    """One transmitter: noise (standard deviation) and resolution in the signal's unit, first-order lag.

    Raises:
        ValueError: a number that is negative or not finite.
    """

    noise: float = 0.0
    resolution: float = 0.0
    lag_s: float = 0.0

    def __post_init__(self) -> None:
        for name in ("noise", "resolution", "lag_s"):
            value = getattr(self, name)
            if not (isfinite(value) and value >= 0.0):
                raise ValueError(f"instrument {name}={value}: must be a finite number, zero or above")


@dataclass(frozen=True)
class InstrumentsState:
    """Lagged values (m) and the number of the next sample."""

    lagged: Floats
    sample: int


class Instruments:
    """All m transmitters of a plant, sampled together.

    Args:
        instruments: m transmitters.
        spans: m engineering ranges.
        seed: of their noise.
        step_s: Δt.

    Raises:
        ValueError: a span for each transmitter is wanted, and a step above zero.
    """

    def __init__(
        self, instruments: Sequence[Instrument], spans: Sequence[tuple[float, float]], seed: int, step_s: float
    ) -> None:
        if len(instruments) != len(spans):
            raise ValueError(f"{len(instruments)} instruments, {len(spans)} spans: give one span for each")
        if not step_s > 0.0:
            raise ValueError(f"step_s={step_s}: must be above zero")
        lags_s = np.array([instrument.lag_s for instrument in instruments])
        low, high = np.array(spans, dtype=float).reshape(-1, 2).T
        self._seed = seed
        self._noise = np.array([instrument.noise for instrument in instruments])
        self._resolution = np.array([instrument.resolution for instrument in instruments])
        self._memory = np.zeros_like(lags_s)
        self._memory[lags_s > 0.0] = np.exp(-step_s / lags_s[lags_s > 0.0])
        self._lowest = low - BELOW_SPAN * (high - low)
        self._highest = high + ABOVE_SPAN * (high - low)

    def start(self, truth: Floats) -> InstrumentsState:
        """Transmitters that have seen this truth (m) for ever."""
        return InstrumentsState(lagged=truth.astype(float), sample=0)

    def sample(self, state: InstrumentsState, truth: Floats) -> tuple[InstrumentsState, Floats, Codes]:
        """Next readings (m) and their status codes (m) for a truth (m) held since the last sample."""
        lagged = truth + self._memory * (state.lagged - truth)
        drawn = generator(self._seed, Stream.INSTRUMENTS, 0, state.sample).standard_normal(lagged.size)
        noisy = lagged + self._noise * drawn
        steps = np.where(self._resolution > 0.0, self._resolution, 1.0)
        rounded = np.where(self._resolution > 0.0, steps * np.round(noisy / steps), noisy)
        readings = np.clip(rounded, self._lowest, self._highest)
        codes = np.where(readings == rounded, GOOD, ENGINEERING_UNITS_EXCEEDED).astype(np.int64)
        return InstrumentsState(lagged, state.sample + 1), readings, codes
