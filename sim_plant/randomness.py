"""Random numbers as pure functions: what was drawn before never matters.

A counter-based generator (Philox 4x64, "Parallel random numbers: as easy as 1, 2, 3", SC'11) is keyed with the seed and
the stream and set to a position; each position has 2⁶⁴ blocks of its own, far more than a sample draws.
"""

from __future__ import annotations

from enum import IntEnum

import numpy as np


class Stream(IntEnum):
    """Who draws."""

    INSTRUMENTS = 1
    CONSUMERS = 2


def generator(seed: int, stream: Stream, index: int, position: int) -> np.random.Generator:
    """Generator for one draw: a function of its arguments alone.

    Raises:
        ValueError: a negative or too large seed.
    """
    if not 0 <= seed < 1 << 64:
        raise ValueError(f"seed={seed}: must be a whole number from 0 to 2^64 - 1")
    bits = np.random.Philox(key=[seed, int(stream)], counter=[0, position, index, 0])
    return np.random.Generator(bits)
