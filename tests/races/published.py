"""The published row and column form, unscaled, for comparison: maps instead of plans.

Section i's contribution is here a **map** Phi_i (k_i x d_i) from its parameters p_i = (x_i(0), w_i, u_i(-1)) to the
rows it touches, split into a row copy Phi and a column copy Psi with multipliers Lambda (arXiv:1909.10074):

    row step      minimise f_r(sum_i Phi_i[r] p_i) + rho/2 sum_i |Phi_i[r] - (Psi_i - Lambda_i)[r]|^2     every row r
    column step   Psi_i = H_i + N_i N_i'(Phi_i + Lambda_i - H_i)                                        every column
    multipliers   Lambda <- Lambda + Phi - Psi

The row step in three ways: by a QP solver, by its closed form (arXiv:2005.13807), and without bands and limits. Where a
row's parameters vanish nothing can be planned through it: the form divides by s = sum |p_i|^2 over the row's sections.

    z = row rule (5) of a = sum_i (Psi_i - Lambda_i)[r] p_i with weight rho / s,    Phi_i[r] += (z - a) / s p_i'
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from time import perf_counter
from typing import Any

import numpy as np
from numba import njit

from controllers.arrays import Floats, Ints
from controllers.ending import first_inputs
from controllers.plans import Measured
from controllers.row_rule import row_rule
from controllers.rows import RowData
from controllers.synthesis import Design
from tests.races.contest import Contest
from tests.races.course import Stretch
from tests.races.racers.protocol import load

RowStep = Callable[[Floats], Floats]
"""Psi - Lambda of every entry, (E,), to Phi, (E,)."""


@dataclass(frozen=True)
class Curve:
    """One way of doing the row step: seconds per pass (of each of several runs), and passes to the accuracy, if run."""

    name: str
    pass_s: tuple[float, ...]
    passes: int | None
    error_spans: float | None


@dataclass(frozen=True)
class Maps:
    """All maps side by side, flat: entry e lies in row `row[e]` and multiplies parameter number `parameter[e]`."""

    design: Design
    row: Ints
    parameter: Ints
    first: Floats

    @classmethod
    def build(cls, design: Design) -> Maps:
        """Lay out the maps of all sections, starting from their particular responses."""
        rows, parameters, first, at = [], [], [], 0
        for response in design.responses:
            k, d = response.gain.shape
            rows.append(np.repeat(response.rows, d))
            parameters.append(np.tile(np.arange(at, at + d), k))
            first.append(response.gain.reshape(-1))
            at += d
        return cls(design, np.concatenate(rows), np.concatenate(parameters), np.concatenate(first))

    def values(self, measured: Measured) -> Floats:
        """Parameter of every entry, (E,)."""
        net = self.design.table.network
        parts = []
        for i in range(net.size):
            parts += [
                measured.x[net.x_at[i] : net.x_at[i + 1]],
                measured.w[net.w_at[i] : net.w_at[i + 1]],
                measured.u_before[net.u_at[i] : net.u_at[i + 1]],
            ]
        return np.concatenate(parts)[self.parameter]


class Explicit:
    """Row step by rule (5), or, with `limited` False, as if there were no band and no limit."""

    def __init__(self, maps: Maps, value: Floats, data: RowData, rho: float, *, limited: bool) -> None:
        self._maps, self._value, self._data, self._limited = maps, value, data, limited
        self._count = maps.design.table.count
        self._s = np.maximum(np.bincount(maps.row, value * value, minlength=self._count), 1e-12)
        self._penalty = rho / self._s

    def __call__(self, copy: Floats) -> Floats:
        """Move every row along its parameters."""
        row, data, p = self._maps.row, self._data, self._penalty
        a: Floats = np.asarray(np.bincount(row, copy * self._value, minlength=self._count), dtype=float)
        z = row_rule(a, p, data) if self._limited else (p * a + 2 * data.price * data.target) / (p + 2 * data.price)
        return np.asarray(copy + ((z - a) / self._s)[row] * self._value)


class BySolver:
    """Row step by a QP solver, one small program per row, kept from pass to pass; only its gradient changes.

    Variables are the entries phi of the row's maps and a band slack e, v the row's parameter values:

        minimise q (v'phi - c)^2 + soft e^2 + rho/2 |phi - copy|^2
        over lo <= v'phi <= hi, band_lo <= v'phi - e <= band_hi
    """

    def __init__(self, maps: Maps, value: Floats, data: RowData, rho: float) -> None:
        self._piqp, self._rho = load("piqp"), rho
        order = np.argsort(maps.row, kind="stable")
        ends = np.cumsum(np.bincount(maps.row, minlength=maps.design.table.count))
        self._entries = np.split(order, ends[:-1])
        self._pull = [-2 * data.price[r] * data.target[r] * value[e] for r, e in enumerate(self._entries)]
        self._solvers = [self._set_up(r, value[e], data) for r, e in enumerate(self._entries)]

    def __call__(self, copy: Floats) -> Floats:
        """Solve every row's program."""
        phi = np.empty_like(copy)
        for entries, pull, solver in zip(self._entries, self._pull, self._solvers, strict=True):
            solver.update(c=np.append(pull - self._rho * copy[entries], 0.0))
            solver.solve()
            phi[entries] = solver.result.x[:-1]
        return phi

    def _set_up(self, r: int, v: Floats, data: RowData) -> Any:
        width = len(v)
        quadratic = np.zeros((width + 1, width + 1))
        quadratic[:width, :width] = 2 * data.price[r] * np.outer(v, v) + self._rho * np.eye(width)
        quadratic[width, width] = 2 * max(float(data.soft_price[r]), 1e-9)
        ends = np.array([[data.lower[r], data.upper[r]], [data.soft_lower[r], data.soft_upper[r]]])
        kept = np.isfinite(ends).any(axis=1)
        constraints = np.array([np.append(v, 0.0), np.append(v, -1.0)])[kept]
        solver = self._piqp.DenseSolver()
        solver.setup(quadratic, np.zeros(width + 1), None, None, constraints, *ends[kept].T)
        return solver


def run(maps: Maps, value: Floats, step: RowStep, passes: int) -> tuple[Floats, list[float]]:
    """Run the form from the particular responses; returns the weighted rows (R,) and the seconds of every pass."""
    design, flat = maps.design, maps.design.flat
    wide = np.array([response.gain.shape[1] for response in design.responses])
    entry_at = np.concatenate([[0], np.cumsum(wide * np.diff(flat.at))])
    psi, lam, phi = maps.first.copy(), np.zeros_like(maps.first), maps.first
    durations = []
    for _ in range(passes):
        start = perf_counter()
        phi = step(psi - lam)
        project_columns(phi, lam, psi, maps.first, entry_at, wide, flat.at, flat.basis, flat.basis_at, flat.freedom)
        lam += phi - psi
        durations.append(perf_counter() - start)
    rows: Floats = np.asarray(np.bincount(maps.row, phi * value, minlength=design.table.count), dtype=float)
    return rows, durations


@njit(nogil=True, cache=True)
def project_columns(  # pragma: no cover
    phi: Floats,
    lam: Floats,
    psi: Floats,
    first: Floats,
    entry_at: Ints,
    wide: Ints,
    at: Ints,
    basis: Floats,
    basis_at: Ints,
    freedom: Ints,
) -> None:
    """Column step: psi = first + N N'(phi + lam - first), section by section, column by column."""
    coefficient = np.empty(freedom.max())
    for i in range(len(freedom)):
        k, d, f = at[i + 1] - at[i], wide[i], freedom[i]
        block = basis[basis_at[i] : basis_at[i] + k * f].reshape(k, f)
        for column in range(d):
            coefficient[:f] = 0.0
            for r in range(k):
                e = entry_at[i] + r * d + column
                gap = phi[e] + lam[e] - first[e]
                for c in range(f):
                    coefficient[c] += gap * block[r, c]
            for r in range(k):
                total = 0.0
                for c in range(f):
                    total += block[r, c] * coefficient[c]
                e = entry_at[i] + r * d + column
                psi[e] = first[e] + total


def curves(contest: Contest, stretch: Stretch, accuracy: float, *, rho: float = 1.0, timed: int = 10) -> list[Curve]:
    """Time the three ways on one period; the closed form is also run until it reaches the accuracy."""
    design, data = contest.design, stretch.data
    maps = Maps.build(design)
    value, weighted = maps.values(stretch.measured), design._weighted(data)
    limited = Explicit(maps, value, weighted, rho, limited=True)
    ways: tuple[tuple[str, RowStep], ...] = (
        ("row problem by a solver", BySolver(maps, value, weighted, rho)),
        ("row problem in closed form", limited),
        ("without limits", Explicit(maps, value, weighted, rho, limited=False)),
    )
    passes, error = None, np.inf
    for tried in (10 * 2**k for k in range(8)):
        weighted_rows, _ = run(maps, value, limited, tried)
        inputs, _ = first_inputs(design.table, weighted_rows / np.sqrt(design.table.weight), data)
        error = contest.error_spans(inputs, stretch.truth)
        if error <= accuracy:
            passes = tried
            break
    out = []
    for name, step in ways:
        run(maps, value, step, 1)
        _, durations = run(maps, value, step, timed)
        mine = step is limited
        out.append(Curve(name, tuple(durations), passes if mine else None, error if mine else None))
    return out
