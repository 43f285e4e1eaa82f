"""The whole-plant reference: the same rows, no locality, solved as one quadratic program.

Variables v = (x_{1..T}, u_{0..T-1}, s), with one slack s_r >= 0 per row that has a soft band:

    minimise    sum_r q_r (z_r − c_r)² + soft_r s_r²,      z = Qx x + Qu u + Qp u_{−1}
    subject to  x_{t+1} − A x_t − B u_t = E w,   lo <= z <= hi,   a − s <= z <= b + s

`assemble` writes it in the form most solvers take, minimise ½ v'Pv + g'v over lower <= K v <= upper; `solve_central`
hands that to the interior-point solver Clarabel. Nothing here runs inside a sampling period.
"""

from __future__ import annotations

from dataclasses import dataclass

import clarabel
import numpy as np
from scipy import sparse

from controllers.arrays import Floats, block_diagonal
from controllers.exceptions import ReferenceSolveError
from controllers.plans import Measured
from controllers.rows import RowData, RowTable


@dataclass(frozen=True)
class QuadraticProgram:
    """minimise ½ v'Pv + g'v over lower <= K v <= upper; rows of the plan are z = row_map v + row_offset."""

    p: sparse.csc_array
    g: Floats
    k: sparse.csc_array
    lower: Floats
    upper: Floats
    row_map: sparse.csr_array
    row_offset: Floats


def dynamics(table: RowTable, measured: Measured) -> tuple[sparse.csr_array, Floats]:
    """The plant over the horizon: a matrix over (x_{1..T}, u_{0..T-1}) and what it must give, (T n,)."""
    net, steps = table.network, table.horizon
    n = net.a.shape[0]
    eye, shift = sparse.eye_array(steps, format="csr"), sparse.eye_array(steps, k=-1, format="csr")
    states = sparse.kron(eye, sparse.eye_array(n)) - sparse.kron(shift, net.a)
    driven = (net.e @ np.broadcast_to(measured.w, (steps, net.e.shape[1])).T).T.reshape(-1)
    driven[:n] += net.a @ measured.x
    return sparse.csr_array(sparse.hstack([states, -sparse.kron(eye, net.b)], format="csr")), driven


def assemble(table: RowTable, measured: Measured, data: RowData) -> QuadraticProgram:
    """Write the whole-plant problem of one period as a quadratic program."""
    qx, qu, qp = table.maps
    banded = np.flatnonzero((data.soft_price > 0) & (np.isfinite(data.soft_lower) | np.isfinite(data.soft_upper)))
    pick = sparse.csr_array((np.ones(len(banded)), (np.arange(len(banded)), banded)), shape=(len(banded), table.count))
    z_map = sparse.csr_array(sparse.hstack([qx, qu, sparse.csr_array((table.count, len(banded)))], format="csr"))
    offset = qp @ measured.u_before

    priced = sparse.diags_array(data.price, format="csr")
    slack = block_diagonal(
        [sparse.csr_array((z_map.shape[1] - len(banded),) * 2), sparse.diags_array(data.soft_price[banded])]
    )
    p = 2 * (z_map.T @ priced @ z_map + slack)
    g = 2 * z_map.T @ (data.price * (offset - data.target))

    plant, driven = dynamics(table, measured)
    plant = sparse.hstack([plant, sparse.csr_array((len(driven), len(banded)))], format="csr")
    hard = np.flatnonzero(np.isfinite(data.lower) | np.isfinite(data.upper))
    slack_map = sparse.hstack(
        [sparse.csr_array((len(banded), z_map.shape[1] - len(banded))), sparse.eye_array(len(banded))], format="csr"
    )
    band_map, nothing = pick @ z_map, np.full(len(banded), np.inf)
    return QuadraticProgram(
        p=sparse.csc_array(p),
        g=np.asarray(g),
        k=sparse.csc_array(sparse.vstack([plant, z_map[hard], band_map + slack_map, band_map - slack_map, slack_map])),
        lower=np.concatenate(
            [driven, (data.lower - offset)[hard], (data.soft_lower - offset)[banded], -nothing, np.zeros(len(banded))]
        ),
        upper=np.concatenate(
            [driven, (data.upper - offset)[hard], nothing, (data.soft_upper - offset)[banded], nothing]
        ),
        row_map=z_map,
        row_offset=offset,
    )


def solve_central(table: RowTable, measured: Measured, data: RowData) -> Floats:
    """Solve the whole-plant problem; returns the rows of the optimal plan, (R,) in spans.

    Raises:
        ReferenceSolveError: the hard limits contradict each other or the solver gave up; carries its status.
    """
    qp = assemble(table, measured, data)
    return np.asarray(qp.row_map @ solve_quadratic_program(qp) + qp.row_offset)


def solve_quadratic_program(qp: QuadraticProgram) -> Floats:
    """Solve one program with Clarabel and return v.

    Raises:
        ReferenceSolveError: it was not solved to its full tolerance.
    """
    equal = qp.lower == qp.upper
    up, low = np.isfinite(qp.upper) & ~equal, np.isfinite(qp.lower) & ~equal
    constraints = sparse.vstack([qp.k[equal], qp.k[up], -qp.k[low]], format="csc")
    bounds = np.concatenate([qp.lower[equal], qp.upper[up], -qp.lower[low]])
    cones = [clarabel.ZeroConeT(int(equal.sum())), clarabel.NonnegativeConeT(int(up.sum() + low.sum()))]
    settings = clarabel.DefaultSettings()
    settings.verbose = False
    settings.tol_gap_abs = settings.tol_gap_rel = settings.tol_feas = 1e-10
    upper_p = sparse.csc_matrix(sparse.triu(qp.p, format="csc"))
    solution = clarabel.DefaultSolver(upper_p, qp.g, sparse.csc_matrix(constraints), bounds, cones, settings).solve()
    if str(solution.status) not in ("Solved", "AlmostSolved"):
        raise ReferenceSolveError(
            f"the whole-plant problem was not solved: {solution.status}; check that its hard limits can be met together"
        )
    return np.asarray(solution.x)
