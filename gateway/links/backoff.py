"""How long to wait before the next attempt to reach a peer that was lost.

    delay(n) = u min(ceiling, first 2^(n−1)),   u uniform in [1/2, 1],   n = 1, 2, ...

Jittered, because a server that comes back must not meet all its clients at the same instant; bounded, because a plant
must not wait for a client that has given up (practice, no source).
"""

from __future__ import annotations

import random
from dataclasses import dataclass


@dataclass(frozen=True)
class Backoff:
    """Bounded exponential back-off with jitter; both times in seconds.

    Raises:
        ValueError: not 0 < first_s <= ceiling_s.
    """

    first_s: float = 0.25
    ceiling_s: float = 5.0

    def __post_init__(self) -> None:
        if not 0.0 < self.first_s <= self.ceiling_s:
            raise ValueError(f"first_s = {self.first_s}, ceiling_s = {self.ceiling_s}: want 0 < first_s <= ceiling_s")

    def delay_s(self, attempt: int, rng: random.Random) -> float:
        """Seconds to wait before this attempt, counted from 1."""
        nominal_s = self.first_s
        for _ in range(attempt - 1):
            nominal_s *= 2.0
            if nominal_s >= self.ceiling_s:
                break
        return min(nominal_s, self.ceiling_s) * rng.uniform(0.5, 1.0)
