"""One section alone on one core, and what the machine would allow.

A distributed node does, per pass, the row step of its own rows and its own contribution's share of the column step; the
numbers of its neighbours come in from outside. The floor under its time is the larger of

    bytes touched / bandwidth        the basis, read twice, and the row arrays once
    operations / peak                4 k f in the column step (k rows, f columns), some 20 per row in the row step

both measured here on this core: bandwidth by summing an array of the same size (so in the cache it would live in) and
one far larger than any cache, peak by a product of square matrices that fit.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from statistics import median, quantiles
from time import perf_counter

import numpy as np
from numba import njit

from controllers import kernels
from controllers.arrays import Floats
from controllers.rows import RowData
from controllers.synthesis import Design

ROW_STEP_OPERATIONS = 20
ROW_STEP_ARRAYS = 14
PASSES = 200


@dataclass(frozen=True)
class Section:
    """One section's pass: time with quartiles, and the floors, in microseconds."""

    rows: int
    freedom: int
    median_us: float
    quartiles_us: tuple[float, float]
    bytes_touched: int
    operations: int
    cache_floor_us: float
    memory_floor_us: float
    operations_floor_us: float

    @property
    def floor_us(self) -> float:
        """What no code on this core could beat: the data from its cache, the operations at peak."""
        return max(self.cache_floor_us, self.operations_floor_us)


def one_section(design: Design, i: int, *, samples: int = 41) -> Section:
    """Time section i's own passes, its neighbours' numbers standing still."""
    response = design.responses[i]
    k, f = response.basis.shape
    rows = response.rows
    weighted = design._weighted(design.data())
    data = RowData(**{item.name: getattr(weighted, item.name)[rows] for item in fields(weighted)})
    y, z, l = np.linspace(-1, 1, k), np.zeros(k), np.zeros(k)  # noqa: E741
    alpha, g, copies = np.zeros(k), np.zeros(k), design.copies[rows]
    touched, at, basis_at = np.arange(k), np.array([0, k]), np.zeros(1, dtype=np.int64)
    basis, freedom = response.basis.reshape(-1).copy(), np.array([f])

    def passes(count: int) -> None:
        kernels.iterate(
            count, 1.0, 1.6, z, y, l, alpha, g, copies, design.settings.rho / copies,
            data.price, data.target, data.soft_price, data.soft_lower, data.soft_upper, data.lower, data.upper,
            touched, at, basis, basis_at, freedom,
        )  # fmt: skip

    passes(1)
    times = []
    for _ in range(samples):
        start = perf_counter()
        passes(PASSES)
        times.append((perf_counter() - start) / PASSES * 1e6)
    low, _, high = quantiles(times, n=4)
    once = basis.nbytes + ROW_STEP_ARRAYS * 8 * k
    touched_bytes = 2 * basis.nbytes + ROW_STEP_ARRAYS * 8 * k
    operations = 4 * k * f + ROW_STEP_OPERATIONS * k
    return Section(
        rows=k,
        freedom=f,
        median_us=median(times),
        quartiles_us=(low, high),
        bytes_touched=touched_bytes,
        operations=operations,
        cache_floor_us=touched_bytes / bandwidth(once) * 1e6,
        memory_floor_us=once / bandwidth(256 * 2**20) * 1e6,
        operations_floor_us=operations / peak() * 1e6,
    )


@njit(nogil=True, cache=True, fastmath=True)
def _read(values: Floats, repeats: int) -> float:  # pragma: no cover
    """Sum the array again and again; one entry is touched each time, so that no sum can be taken from the last."""
    total = 0.0
    for repeat in range(repeats):
        values[repeat % len(values)] = repeat
        for k in range(len(values)):
            total += values[k]
    return total


def bandwidth(size_bytes: int) -> float:
    """Bytes per second one core can read from an array of this size, best of several."""
    values = np.ones(max(64, size_bytes // 8))
    repeats = max(1, int(2**26 // values.nbytes))
    _read(values, 1)
    best = np.inf
    for _ in range(7):
        start = perf_counter()
        _read(values, repeats)
        best = min(best, (perf_counter() - start) / repeats)
    return float(values.nbytes / best)


def peak(size: int = 256) -> float:
    """Floating-point operations per second one core can do (64-bit), best of several."""
    left = np.random.default_rng(0).normal(size=(size, size))
    best = np.inf
    left @ left
    for _ in range(15):
        start = perf_counter()
        left @ left
        best = min(best, perf_counter() - start)
    return float(2 * size**3 / best)
