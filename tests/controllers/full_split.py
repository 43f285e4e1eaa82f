"""The row and column split written out on full copies, the truth that the iteration of one number per row must equal.

Every contribution i has a row copy, a column copy and multipliers of its own for every row it touches. One pass, in
weighted rows (arXiv:1909.10074; relaxation: Boyd et al., Found. Trends Mach. Learn. 3 (2011) 1-122, section 3.4.3):

    row step      minimise  sum_r f_r(sum_i phi_ir) + rho/2 sum_i |phi_i − psi_i + mult_i|²
    relaxation    phi_i <- relax phi_i + (1 − relax) psi_i
    column step   psi_i  = the allowed contribution nearest to phi_i + mult_i
    multipliers   mult_i <- mult_i + phi_i − psi_i

The row step gives every copy of a row the same increment, (z_r − a_r) / n_r, with z_r from the one-number row problem.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from controllers.arrays import Floats, Ints
from controllers.row_rule import row_rule
from controllers.rows import RowData

Nearest = Callable[[Floats], Floats]
"""Projection of one contribution's weighted rows onto what it is allowed to be."""


@dataclass(frozen=True)
class Split:
    """The copies of all contributions, one array per contribution."""

    column: tuple[Floats, ...]
    multiplier: tuple[Floats, ...]


def summed(touched: Sequence[Ints], parts: Sequence[Floats], count: int) -> Floats:
    """Sum of S_i' part_i, (R,)."""
    out = np.zeros(count)
    for rows, part in zip(touched, parts, strict=True):
        np.add.at(out, rows, part)
    return out


def one_pass(
    split: Split, touched: Sequence[Ints], nearest: Sequence[Nearest], data: RowData, rho: float, relax: float
) -> tuple[Floats, Split]:
    """One pass; `data` in weighted rows. Returns z and the copies after it."""
    count = len(data.price)
    copies = np.bincount(np.concatenate(touched), minlength=count)
    pulled = [psi - multiplier for psi, multiplier in zip(split.column, split.multiplier, strict=True)]
    a = summed(touched, pulled, count)
    z = row_rule(a, rho / copies, data)
    column, multipliers = [], []
    for i, rows in enumerate(touched):
        row_copy = pulled[i] + (z - a)[rows] / copies[rows]
        row_copy = relax * row_copy + (1 - relax) * split.column[i]
        column.append(nearest[i](row_copy + split.multiplier[i]))
        multipliers.append(split.multiplier[i] + row_copy - column[i])
    return z, Split(tuple(column), tuple(multipliers))
