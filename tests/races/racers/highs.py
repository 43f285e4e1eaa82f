"""HiGHS, active set: bounds and gradient changed in place. Its quadratic solver keeps no basis between solves."""

from __future__ import annotations

import numpy as np
from scipy import sparse

from controllers.plans import Measured
from controllers.rows import RowData
from tests.races.program import Program
from tests.races.racers.protocol import Answer, Entry, Family, Setup, load


class Running:
    """A solver that holds the model."""

    def __init__(self, program: Program, setup: Setup, usual: RowData) -> None:
        highspy = load("highspy")
        self._program, self._optimal = program, highspy.HighsModelStatus.kOptimal
        numbers = program.numbers(program.rest, usual)
        rows, columns = program.k.shape
        lp = highspy.HighsLp()
        lp.num_col_, lp.num_row_ = columns, rows
        lp.col_cost_ = numbers.g
        lp.col_lower_, lp.col_upper_ = np.full(columns, -highspy.kHighsInf), np.full(columns, highspy.kHighsInf)
        lp.row_lower_, lp.row_upper_ = numbers.lower, numbers.upper
        lp.a_matrix_.format_ = highspy.MatrixFormat.kColwise
        lp.a_matrix_.start_, lp.a_matrix_.index_, lp.a_matrix_.value_ = (
            program.k.indptr,
            program.k.indices,
            program.k.data,
        )
        lower = sparse.csc_array(sparse.tril(program.p, format="csc"))
        hessian = highspy.HighsHessian()
        hessian.dim_ = columns
        hessian.format_ = highspy.HessianFormat.kTriangular
        hessian.start_, hessian.index_, hessian.value_ = lower.indptr, lower.indices, lower.data
        self._solver = highspy.Highs()
        self._solver.setOptionValue("output_flag", False)
        self._solver.setOptionValue("threads", 1)
        self._solver.setOptionValue("time_limit", 20.0)
        for name in ("primal_feasibility_tolerance", "dual_feasibility_tolerance"):
            self._solver.setOptionValue(name, setup.tolerance)
        self._solver.passModel(lp)
        self._solver.passHessian(hessian)
        self._rows, self._columns = np.arange(rows, dtype=np.int32), np.arange(columns, dtype=np.int32)

    def solve(self, measured: Measured, data: RowData) -> Answer:
        """Change three vectors and solve."""
        numbers = self._program.numbers(measured, data)
        self._solver.changeColsCost(len(self._columns), self._columns, numbers.g)
        self._solver.changeRowsBounds(len(self._rows), self._rows, numbers.lower, numbers.upper)
        self._solver.run()
        inputs = np.asarray(self._solver.getSolution().col_value)[self._program.inputs]
        iterations = int(self._solver.getInfo().qp_iteration_count)
        return Answer(inputs, iterations, self._solver.getModelStatus() == self._optimal)

    def forget(self) -> None:
        """Nothing is remembered."""


ENTRY = Entry(
    name="HiGHS",
    family=Family.ACTIVE_SET,
    package="highspy",
    enter=lambda contest, setup: Running(contest.program, setup, contest.usual),
    tolerances=(1e-4, 1e-6, 1e-8),
    tunings=({},),
)
