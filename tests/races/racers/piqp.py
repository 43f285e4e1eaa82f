"""PIQP, proximal interior point: symbolic factorisation and scaling kept, vectors updated. It has no warm start.

One of its factorisations is made for problems in stages. It sees stages in the order of the variables, so it is given
them section by section: a row of sections is then as good as a row of stages.
"""

from __future__ import annotations

import numpy as np
from scipy import sparse

from controllers.plans import Measured
from controllers.rows import RowData
from tests.races.program import Program
from tests.races.racers.protocol import Answer, Entry, Family, Setup, load


class Running:
    """A solver that was set up."""

    def __init__(self, program: Program, setup: Setup, usual: RowData) -> None:
        piqp = load("piqp")
        self._solver = piqp.SparseSolver()
        settings = self._solver.settings
        settings.eps_abs = settings.eps_rel = setup.tolerance
        settings.eps_duality_gap_abs = settings.eps_duality_gap_rel = setup.tolerance
        settings.preconditioner_reuse_on_update = True
        settings.kkt_solver = getattr(piqp.KKTSolver, setup.tuning["kkt_solver"])
        self._solved = piqp.PIQP_SOLVED
        self._program, self._order = program, program.section_by_section
        self._inputs = np.argsort(self._order)[program.inputs]
        numbers, e = program.numbers(program.rest, usual), program.equations
        rows = sparse.csr_array(program.k)[:, self._order]
        self._solver.setup(
            sparse.csc_matrix(sparse.csr_array(program.p)[self._order][:, self._order]),
            numbers.g[self._order],
            sparse.csc_matrix(rows[:e]),
            numbers.lower[:e],
            sparse.csc_matrix(rows[e:]),
            numbers.lower[e:],
            numbers.upper[e:],
        )

    def solve(self, measured: Measured, data: RowData) -> Answer:
        """Update vectors and solve."""
        numbers, e = self._program.numbers(measured, data), self._program.equations
        self._solver.update(c=numbers.g[self._order], b=numbers.lower[:e], h_l=numbers.lower[e:], h_u=numbers.upper[e:])
        status, result = self._solver.solve(), self._solver.result
        return Answer(result.x[self._inputs], int(result.info.iter), status == self._solved)

    def forget(self) -> None:
        """Nothing is remembered."""


ENTRY = Entry(
    name="PIQP",
    family=Family.INTERIOR,
    package="piqp",
    enter=lambda contest, setup: Running(contest.program, setup, contest.usual),
    tolerances=tuple(10.0**-k for k in range(2, 10)),
    tunings=tuple({"kkt_solver": solver} for solver in ("sparse_ldlt", "sparse_ldlt_ineq_cond", "sparse_multistage")),
)
