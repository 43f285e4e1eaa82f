"""Clarabel, interior point: symbolic factorisation and scaling kept, vectors updated. It has no warm start."""

from __future__ import annotations

import numpy as np

from controllers.plans import Measured
from controllers.rows import RowData
from tests.races.program import OneSided
from tests.races.racers.protocol import Answer, Entry, Family, Setup, load


class Running:
    """A solver that was set up."""

    def __init__(self, program: OneSided, setup: Setup, usual: RowData) -> None:
        clarabel = load("clarabel")
        settings = clarabel.DefaultSettings()
        settings.verbose = False
        settings.presolve_enable = False  # it would forbid updates
        settings.tol_gap_abs = settings.tol_gap_rel = settings.tol_feas = setup.tolerance
        for name, value in setup.tuning.items():
            setattr(settings, name, value)
        self._program = program
        g, bound = program.vectors(program.whole.rest, usual)
        equations = program.whole.equations
        cones = [clarabel.ZeroConeT(equations), clarabel.NonnegativeConeT(len(bound) - equations)]
        self._solver = clarabel.DefaultSolver(program.upper_p, g, program.k, bound, cones, settings)

    def solve(self, measured: Measured, data: RowData) -> Answer:
        """Update two vectors and solve."""
        g, bound = self._program.vectors(measured, data)
        self._solver.update(q=g, b=bound)
        solution = self._solver.solve()
        inputs = np.asarray(solution.x)[self._program.whole.inputs]
        return Answer(inputs, int(solution.iterations), str(solution.status) in ("Solved", "AlmostSolved"))

    def forget(self) -> None:
        """Nothing is remembered."""


ENTRY = Entry(
    name="Clarabel",
    family=Family.INTERIOR,
    package="clarabel",
    enter=lambda contest, setup: Running(OneSided.build(contest.program, contest.usual), setup, contest.usual),
    tolerances=tuple(10.0**-k for k in range(2, 10)),
    tunings=(
        {"direct_solve_method": "qdldl", "max_threads": 1},
        {"direct_solve_method": "faer", "max_threads": 1},
    ),
)
