"""Rows of every make, for the row rule, the kernels and the checks against quadratic program solvers."""

from math import inf

import numpy as np

from controllers.arrays import Floats
from controllers.rows import RowData


def random_rows(rng: np.random.Generator, count: int) -> tuple[Floats, Floats, RowData]:
    """Rows of every make: unpriced, without band, bands and limits of no width, limits on one side only."""

    def some(share: float) -> Floats:
        return np.asarray(rng.random(count) < share, dtype=float)

    lower, soft_lower = rng.normal(-1, 1, count), rng.normal(-0.3, 0.6, count)
    data = RowData(
        price=rng.uniform(0, 5, count) * some(0.7),
        target=rng.normal(0, 1, count),
        soft_price=rng.uniform(0, 20, count) * some(0.7),
        soft_lower=np.where(rng.random(count) < 0.2, -inf, soft_lower),
        soft_upper=np.where(rng.random(count) < 0.2, inf, soft_lower + rng.uniform(0, 1, count) * some(0.7)),
        lower=np.where(rng.random(count) < 0.3, -inf, lower),
        upper=np.where(rng.random(count) < 0.3, inf, lower + rng.uniform(0, 2, count) * some(0.8)),
    )
    return rng.normal(0, 2, count), rng.uniform(0.05, 3, count), data
