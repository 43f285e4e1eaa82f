"""OSQP, operator splitting: factorisation kept, vectors updated, warm from its own last primal and dual."""

from __future__ import annotations

from typing import Any

from controllers.plans import Measured
from controllers.rows import RowData
from tests.races.program import Program
from tests.races.racers.protocol import Answer, Entry, Family, Setup, load


class Running:
    """A solver that was set up."""

    def __init__(self, program: Program, setup: Setup, usual: RowData) -> None:
        self._program, self._setup, self._usual = program, setup, usual
        self._solver: Any = None
        self.forget()

    def solve(self, measured: Measured, data: RowData) -> Answer:
        """Update three vectors and solve."""
        numbers = self._program.numbers(measured, data)
        self._solver.update(q=numbers.g, l=numbers.lower, u=numbers.upper)
        result = self._solver.solve(raise_error=False)
        return Answer(result.x[self._program.inputs], int(result.info.iter), str(result.info.status) == "solved")

    def forget(self) -> None:
        """Set up afresh: adapted penalties are forgotten with the iterates."""
        numbers = self._program.numbers(self._program.rest, self._usual)
        self._solver = load("osqp").OSQP()
        self._solver.setup(
            self._program.p,
            numbers.g,
            self._program.k,
            numbers.lower,
            numbers.upper,
            eps_abs=self._setup.tolerance,
            eps_rel=self._setup.tolerance,
            max_iter=20_000,
            verbose=False,
            warm_starting=True,
            **self._setup.tuning,
        )


ENTRY = Entry(
    name="OSQP",
    family=Family.SPLITTING,
    package="osqp",
    enter=lambda contest, setup: Running(contest.program, setup, contest.usual),
    tolerances=tuple(10 ** (-k / 2) for k in range(3, 16)),
    tunings=tuple(
        {"rho": rho, "adaptive_rho": adaptive, "check_termination": 5}
        for rho, adaptive in ((0.1, 1), (0.03, 0), (0.1, 0), (0.3, 0), (1.0, 0), (3.0, 0), (10.0, 0))
    ),
)
