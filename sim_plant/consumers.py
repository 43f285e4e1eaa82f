"""Consumers: disturbances of the plant that switch between two levels at random times.

Problem: something draws from a section, sometimes little, sometimes much, and tells nobody. A consumer is a random
telegraph signal: it dwells at `low` for a time that is exponentially distributed with mean τ_low, then at `high` with
mean τ_high, and so on. Its n-th dwell is

    T_n = −τ ln(1 − U_n),     U_n uniform on [0, 1), a pure function of (seed, consumer, n)

(inversion of the exponential distribution), so that a seed gives the same day whatever else is asked of the plant.
Values are in the signal's engineering unit, times in seconds of plant time.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import log1p

import numpy as np

from sim_plant.randomness import Stream, generator


@dataclass(frozen=True)
class Profile:
    """Two levels and the mean time at each.

    Raises:
        ValueError: a mean that isn't positive.
    """

    low: float
    high: float
    mean_low_s: float
    mean_high_s: float

    def __post_init__(self) -> None:
        for name, value in (("mean_low_s", self.mean_low_s), ("mean_high_s", self.mean_high_s)):
            if not (value > 0.0 and np.isfinite(value)):
                raise ValueError(f"profile {name}={value}: must be a finite number of seconds above zero")


@dataclass(frozen=True)
class ConsumerState:
    """Which dwell a consumer is in, and until when; dwell 0 is the first at `low`."""

    dwell: int
    until_s: float

    @property
    def high(self) -> bool:
        """Whether it draws its high level."""
        return self.dwell % 2 == 1


@dataclass(frozen=True)
class Consumer:
    """One consumer; `index` tells its random numbers from those of the others."""

    profile: Profile
    seed: int
    index: int

    def start(self) -> ConsumerState:
        """Return the state at time zero."""
        return ConsumerState(dwell=0, until_s=self._dwell_s(0))

    def after(self, state: ConsumerState, time_s: float) -> ConsumerState:
        """State at this time, which must not lie before the one of `state`."""
        dwell, until_s = state.dwell, state.until_s
        while until_s <= time_s:
            dwell += 1
            until_s += self._dwell_s(dwell)
        return state if dwell == state.dwell else ConsumerState(dwell, until_s)

    def value(self, state: ConsumerState) -> float:
        """What it draws."""
        return self.profile.high if state.high else self.profile.low

    def _dwell_s(self, dwell: int) -> float:
        mean_s = self.profile.mean_high_s if dwell % 2 else self.profile.mean_low_s
        uniform = generator(self.seed, Stream.CONSUMERS, self.index, dwell).random()
        return -mean_s * log1p(-uniform)
