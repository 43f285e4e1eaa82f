"""The compiled loops of the synthesis; nothing here decides anything.

Symbols as in `controllers.synthesis`; all row arrays have shape (R,) and live in weighted rows. Localities are stored
flat: contribution i touches `touched[at[i]:at[i+1]]`, its basis starts at `basis[basis_at[i]]`, row-major, with
`freedom[i]` columns. Kernels release the interpreter lock, so that the event loop keeps its time while they run.
The plain-numpy form of each stands in the tests as its oracle.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from controllers.arrays import Floats, Ints


@njit(nogil=True, cache=True, fastmath={"reassoc", "contract", "nsz"})
def project(
    source: Floats, out: Floats, touched: Ints, at: Ints, basis: Floats, basis_at: Ints, freedom: Ints
) -> None:  # pragma: no cover
    """out = G source,  G = sum_i S_i' N_i N_i' S_i.

    Rows are taken as views of one block, so that the compiler sees plain unit-stride loops and vectorises both;
    indexing the flat basis instead costs four times as much.
    """
    out[:] = 0.0
    coefficients = np.empty(freedom.max())
    for i in range(len(freedom)):
        width = freedom[i]
        rows = touched[at[i] : at[i + 1]]
        block = basis[basis_at[i] : basis_at[i] + len(rows) * width].reshape(len(rows), width)
        c = coefficients[:width]
        c[:] = 0.0
        for r in range(len(rows)):
            value, row = source[rows[r]], block[r]
            for k in range(width):
                c[k] += value * row[k]
        for r in range(len(rows)):
            total, row = 0.0, block[r]
            for k in range(width):
                total += row[k] * c[k]
            out[rows[r]] += total


@njit(nogil=True, cache=True)
def iterate(  # pragma: no cover
    count: int,
    first_relax: float,
    relax: float,
    z: Floats,
    y: Floats,
    l: Floats,  # noqa: E741 - the symbol of the package head
    alpha: Floats,
    g: Floats,
    copies: Floats,
    penalty: Floats,
    price: Floats,
    target: Floats,
    soft_price: Floats,
    soft_lower: Floats,
    soft_upper: Floats,
    lower: Floats,
    upper: Floats,
    touched: Ints,
    at: Ints,
    basis: Floats,
    basis_at: Ints,
    freedom: Ints,
) -> None:
    """Run `count` passes of (4) in place: row step by rule (5), column step by G, multipliers.

    `first_relax` is the relaxation of the first of them, `relax` of the others.
    """
    for k in range(count):
        along = relax if k > 0 else first_relax
        for r in range(len(z)):
            a = y[r] - l[r]
            p, q = penalty[r], price[r]
            pull = p * a + 2.0 * q * target[r]
            v = pull / (p + 2.0 * q)
            if v > soft_upper[r]:
                s = soft_price[r]
                v = (pull + 2.0 * s * soft_upper[r]) / (p + 2.0 * q + 2.0 * s)
            elif v < soft_lower[r]:
                s = soft_price[r]
                v = (pull + 2.0 * s * soft_lower[r]) / (p + 2.0 * q + 2.0 * s)
            v = min(max(v, lower[r]), upper[r])
            z[r] = v
            alpha[r] = along * (v - a) / copies[r]
        project(alpha, g, touched, at, basis, basis_at, freedom)
        for r in range(len(z)):
            y[r] += g[r]
            l[r] = (1.0 - along) * l[r] + copies[r] * alpha[r] - g[r]
