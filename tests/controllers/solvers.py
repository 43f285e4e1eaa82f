"""Quadratic programs for the tests, written and solved apart from the package under test.

    minimise ½ v'Pv + g'v   over   lower <= K v <= upper

`row_program` writes the row costs (2) of any affine plan z = offset + matrix v, one slack per banded row. With
`condensed` the plan is that of the whole plant, states eliminated by simulation; with `localized` it is the sum of the
contributions of a design. Clarabel and PIQP are two independent interior-point codes.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import clarabel
import numpy as np
import piqp
from scipy import sparse

from controllers.arrays import Floats, block_diagonal
from controllers.plans import Measured
from controllers.rows import RowData, RowTable
from controllers.synthesis import Design
from tests.controllers.plants import rows_of_trajectory, trajectory


@dataclass(frozen=True)
class Program:
    """One quadratic program; all rows of K are two-sided, infinities allowed."""

    p: sparse.csc_matrix
    g: Floats
    k: sparse.csc_matrix
    lower: Floats
    upper: Floats


Solver = Callable[[Program], Floats]


def clarabel_solver(program: Program) -> Floats:
    """Solve with Clarabel."""
    equal = program.lower == program.upper
    up, low = np.isfinite(program.upper) & ~equal, np.isfinite(program.lower) & ~equal
    rows = sparse.csr_array(program.k)
    settings = clarabel.DefaultSettings()
    settings.verbose = False
    settings.tol_gap_abs = settings.tol_gap_rel = settings.tol_feas = 1e-13
    solution = clarabel.DefaultSolver(
        sparse.csc_matrix(sparse.triu(program.p)),
        program.g,
        sparse.csc_matrix(sparse.vstack([rows[equal], rows[up], -rows[low]])),
        np.concatenate([program.lower[equal], program.upper[up], -program.lower[low]]),
        [clarabel.ZeroConeT(int(equal.sum())), clarabel.NonnegativeConeT(int(up.sum() + low.sum()))],
        settings,
    ).solve()
    assert str(solution.status) in ("Solved", "AlmostSolved"), solution.status
    return np.asarray(solution.x)


def piqp_solver(program: Program) -> Floats:
    """Solve with PIQP."""
    equal = program.lower == program.upper
    between = ~equal & (np.isfinite(program.lower) | np.isfinite(program.upper))
    rows = sparse.csr_array(program.k)
    solver = piqp.SparseSolver()
    settings = solver.settings
    settings.eps_abs = settings.eps_rel = 1e-12
    settings.eps_duality_gap_abs = settings.eps_duality_gap_rel = 1e-12
    settings.max_iter = 500
    solver.setup(
        program.p,
        program.g,
        sparse.csc_matrix(rows[equal]),
        program.lower[equal],
        sparse.csc_matrix(rows[between]),
        program.lower[between],
        program.upper[between],
    )
    status = solver.solve()
    assert status == piqp.PIQP_SOLVED, status
    return np.asarray(solver.result.x)


SOLVERS: dict[str, Solver] = {"clarabel": clarabel_solver, "piqp": piqp_solver}


def row_program(offset: Floats, matrix: Floats, data: RowData) -> Program:
    """Sum of (2) over plans z = offset + matrix v; variables are v, then one slack per banded row."""
    free = matrix.shape[1]
    banded = np.flatnonzero((data.soft_price > 0) & (np.isfinite(data.soft_lower) | np.isfinite(data.soft_upper)))
    count = len(banded)
    quadratic = 2 * matrix.T @ (data.price[:, None] * matrix)
    linear = 2 * matrix.T @ (data.price * (offset - data.target))
    none, eye = np.zeros((len(offset), count)), np.eye(count)
    nothing = np.full(count, np.inf)
    return Program(
        p=sparse.csc_matrix(block_diagonal([quadratic, 2 * np.diag(data.soft_price[banded])])),
        g=np.concatenate([linear, np.zeros(count)]),
        k=sparse.csc_matrix(
            np.block(
                [
                    [matrix, none],
                    [matrix[banded], eye],
                    [matrix[banded], -eye],
                    [np.zeros((count, free)), eye],
                ]
            )
        ),
        lower=np.concatenate([data.lower - offset, (data.soft_lower - offset)[banded], -nothing, np.zeros(count)]),
        upper=np.concatenate([data.upper - offset, nothing, (data.soft_upper - offset)[banded], nothing]),
    )


def best_plan(solver: Solver, offset: Floats, matrix: Floats, data: RowData) -> Floats:
    """Rows of the optimal plan, (R,) in spans."""
    return offset + matrix @ solver(row_program(offset, matrix, data))[: matrix.shape[1]]


def condensed(table: RowTable, measured: Measured) -> tuple[Floats, Floats]:
    """Offset and matrix of the whole plant's plans, z = offset + matrix u_{0..T-1}, by simulating every unit input."""
    net, steps, m = table.network, table.horizon, table.network.b.shape[1]

    def rows(x: Floats, w: Floats, inputs: Floats, u_before: Floats) -> Floats:
        return rows_of_trajectory(net, table.quantities, trajectory(net, x, w, inputs), inputs, u_before)

    offset = rows(measured.x, measured.w, np.zeros((steps, m)), measured.u_before)
    rest = (np.zeros_like(measured.x), np.zeros_like(measured.w))
    matrix = [rows(*rest, unit.reshape(steps, m), np.zeros(m)) for unit in np.eye(steps * m)]
    return offset, np.array(matrix).T


def localized(design: Design, measured: Measured) -> tuple[Floats, Floats]:
    """Offset and matrix of all sums of contributions, z = y0 + [S_i' N_i] v, in spans.

    Different contributions can make the same plan; an orthonormal basis of all of them makes v unique.
    """
    table = design.table
    root = np.sqrt(table.weight)
    blocks = []
    for response in design.responses:
        block = np.zeros((table.count, response.basis.shape[1]))
        block[response.rows] = response.basis
        blocks.append(block)
    left, values, _ = np.linalg.svd(np.hstack(blocks) / root[:, None], full_matrices=False)
    return design.free_response(measured) / root, left[:, values > 1e-10 * values[0]]
