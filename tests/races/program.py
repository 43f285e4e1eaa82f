"""The whole-plant problem of one period as a careful user would write it for a general-purpose solver.

    minimise  sum_r q_r (z_r - c_r)^2 + s_r e_r^2       z = F v + offset,   v = (x_1..x_T, u_0..u_{T-1}, e)

    F v in [lo - offset, hi - offset]     rows with hard limits
    F v - e in [a - offset, b - offset]   rows with a soft band; e is free, one two-sided row each
    x_{t+1} - A x_t - B u_t = E w         dynamics, equations

States stay in (eliminating them fills the matrices). P and K never change between periods, so a solver may keep its
factorisation: a period is three vectors, g, lower, upper, all affine in the measurement. Constraints come in the order
equations, two-sided rows, so that each solver can take them as it likes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import sparse

from controllers.arrays import Floats, Ints, block_diagonal
from controllers.plans import Measured
from controllers.rows import RowData, RowTable


@dataclass(frozen=True)
class Numbers:
    """What changes: gradient g, and the ends of all constraints."""

    g: Floats
    lower: Floats
    upper: Floats


@dataclass(frozen=True)
class Program:
    """minimise 1/2 v'Pv + g'v over lower <= K v <= upper; the first `equations` rows of K are equations."""

    table: RowTable
    p: sparse.csc_matrix
    k: sparse.csc_matrix
    equations: int
    inputs: slice
    z_map: sparse.csr_array
    z_map_transposed: sparse.csr_array
    hard: Ints
    banded: Ints

    @classmethod
    def build(cls, table: RowTable, data: RowData) -> Program:
        """Write the matrices; which rows are limited or banded is taken from `data` and fixed from then on."""
        net, steps = table.network, table.horizon
        n, m = net.b.shape
        qx, qu, _ = table.maps
        hard = np.flatnonzero(np.isfinite(data.lower) | np.isfinite(data.upper))
        banded = np.flatnonzero((data.soft_price > 0) & (np.isfinite(data.soft_lower) | np.isfinite(data.soft_upper)))
        z_map = sparse.csr_array(sparse.hstack([qx, qu], format="csr"))
        slack_price = 2 * sparse.diags_array(data.soft_price[banded])
        quadratic = 2 * (z_map.T @ sparse.diags_array(data.price) @ z_map)
        eye, shift = sparse.eye_array(steps, format="csr"), sparse.eye_array(steps, k=-1, format="csr")
        dynamics = sparse.hstack(
            [
                sparse.kron(eye, sparse.eye_array(n)) - sparse.kron(shift, net.a),
                -sparse.kron(eye, net.b),
                sparse.csr_array((steps * n, len(banded))),
            ]
        )
        limited = sparse.hstack([z_map[hard], sparse.csr_array((len(hard), len(banded)))])
        bands = sparse.hstack([z_map[banded], -sparse.eye_array(len(banded))])
        return cls(
            table=table,
            p=sparse.csc_matrix(block_diagonal([quadratic, slack_price])),
            k=sparse.csc_matrix(sparse.vstack([dynamics, limited, bands], format="csc")),
            equations=steps * n,
            inputs=slice(steps * n, steps * n + m),
            z_map=z_map,
            z_map_transposed=sparse.csr_array(z_map.T),
            hard=hard,
            banded=banded,
        )

    @property
    def rest(self) -> Measured:
        """A measurement of nothing going on, for setting solvers up."""
        net = self.table.network
        return Measured(np.zeros(net.a.shape[0]), np.zeros(net.e.shape[1]), np.zeros(net.b.shape[1]))

    @property
    def section_by_section(self) -> Ints:
        """Order of the variables that puts each section's whole trajectory together: the program is then banded."""
        net, steps = self.table.network, self.table.horizon
        of_state = np.repeat(np.arange(net.size), np.diff(net.x_at))
        sections = [np.tile(of_state, steps), np.tile(net.section_of_input(), steps), self.table.section[self.banded]]
        return np.argsort(np.concatenate(sections), kind="stable").astype(np.int64)

    def numbers(self, measured: Measured, data: RowData) -> Numbers:
        """Return the vectors of one period."""
        net = self.table.network
        n = net.a.shape[0]
        offset = self.table.maps[2] @ measured.u_before
        driven = np.tile(net.e @ measured.w, self.table.horizon)
        driven[:n] += net.a @ measured.x
        slope = 2 * (self.z_map_transposed @ (data.price * (offset - data.target)))
        return Numbers(
            g=np.concatenate([slope, np.zeros(len(self.banded))]),
            lower=np.concatenate([driven, (data.lower - offset)[self.hard], (data.soft_lower - offset)[self.banded]]),
            upper=np.concatenate([driven, (data.upper - offset)[self.hard], (data.soft_upper - offset)[self.banded]]),
        )


@dataclass(frozen=True)
class OneSided:
    """The same program for cone solvers: K v + s = b, s zero in the first `whole.equations` rows, s >= 0 below."""

    whole: Program
    upper_p: sparse.csc_matrix
    k: sparse.csc_matrix
    up: Ints
    low: Ints

    @classmethod
    def build(cls, whole: Program, data: RowData) -> OneSided:
        """Turn every two-sided row into the one-sided ones that are finite."""
        numbers = whole.numbers(whole.rest, data)
        equations = whole.equations
        up = equations + np.flatnonzero(np.isfinite(numbers.upper[equations:]))
        low = equations + np.flatnonzero(np.isfinite(numbers.lower[equations:]))
        rows = sparse.csr_array(whole.k)
        return cls(
            whole=whole,
            upper_p=sparse.csc_matrix(sparse.triu(whole.p, format="csc")),
            k=sparse.csc_matrix(sparse.vstack([rows[:equations], rows[up], -rows[low]], format="csc")),
            up=up,
            low=low,
        )

    def vectors(self, measured: Measured, data: RowData) -> tuple[Floats, Floats]:
        """Gradient, and right-hand side b."""
        numbers = self.whole.numbers(measured, data)
        bound = [numbers.lower[: self.whole.equations], numbers.upper[self.up], -numbers.lower[self.low]]
        return numbers.g, np.concatenate(bound)
