"""The row rule: what one row would be if it could choose alone, in closed form, and at which limit that leaves it."""

from __future__ import annotations

from enum import Enum

import numpy as np

from controllers.arrays import Floats
from controllers.rows import RowData


class Region(Enum):
    """Where the row rule left an input."""

    LOWER = "at lower limit"
    FREE = "free"
    UPPER = "at upper limit"


def row_rule(a: Floats, penalty: Floats, data: RowData) -> Floats:
    """Closed-form minimiser of f_r(z) + (p/2)(z − a)² for every row, rule (5); the oracle of the compiled kernel.

    Explicit solution of the row problem with three regions and a clip: arXiv:2005.13807.

    Args:
        a: where each row is pulled to, (R,) in spans.
        penalty: p, (R,).
        data: numbers of (2).
    """
    q, s = data.price, data.soft_price
    pull = penalty * a + 2 * q * data.target
    free = pull / (penalty + 2 * q)
    with np.errstate(invalid="ignore"):  # an absent band is infinite and priced zero: 0 · inf is never selected
        above = (pull + 2 * s * data.soft_upper) / (penalty + 2 * q + 2 * s)
        below = (pull + 2 * s * data.soft_lower) / (penalty + 2 * q + 2 * s)
    z = np.where(free > data.soft_upper, above, np.where(free < data.soft_lower, below, free))
    return np.asarray(np.clip(z, data.lower, data.upper))
