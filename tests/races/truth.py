"""The exact optimum of a period, by a solver that does not race, and proof that it is one.

QPALM (proximal augmented Lagrangian with Newton steps) solves the whole-plant program to 1e-9; where it is not
installed, Clarabel does in its tightest setting. Neither is believed: what they return counts only if it satisfies the
optimality conditions of

    minimise 1/2 v'Pv + g'v   over   lower <= K v <= upper

checked here with nothing but products: P v + g + K'y = 0, K v within its ends, y > 0 only where K v is at its upper
end and y < 0 only at its lower one. The program is convex, so these conditions are sufficient (Boyd and Vandenberghe,
Convex Optimization, 2004, section 5.5.3).
"""

from __future__ import annotations

from typing import Any, Protocol

import numpy as np

from controllers.arrays import Floats
from controllers.plans import Measured
from controllers.rows import RowData
from tests.races.program import Numbers, OneSided, Program
from tests.races.racers.protocol import available, load

SOLVER = "qpalm"
SOLVER_TOLERANCE = 1e-9
TIGHTEST_TOLERANCE = 1e-11
PROOF_TOLERANCE = 1e-6
UNBOUNDED = 1e20  # what QPALM takes for infinity


class NotOptimalError(Exception):
    """The truth of a period could not be proved."""


class Solver(Protocol):
    """Returns a primal v and a dual y of one period's program."""

    def solve(self, measured: Measured, data: RowData, numbers: Numbers) -> tuple[Floats, Floats]:
        """Solve one period."""


class Truth:
    """Solves every period exactly."""

    def __init__(self, program: Program, usual: RowData) -> None:
        self._program = program
        self._solver: Solver = _Qpalm(program, usual) if available(SOLVER) else _Clarabel(program, usual)

    def solve(self, measured: Measured, data: RowData) -> Floats:
        """First inputs of the optimum, (m,).

        Raises:
            NotOptimalError: what the solver returned is not optimal to `PROOF_TOLERANCE`.
        """
        numbers = self._program.numbers(measured, data)
        v, y = self._solver.solve(measured, data, numbers)
        wrong = departure(self._program, numbers, v, y)
        if not wrong <= PROOF_TOLERANCE:
            raise NotOptimalError(f"the truth departs from the optimality conditions by {wrong:.1e}")
        return np.asarray(v[self._program.inputs])


def departure(program: Program, numbers: Numbers, v: Floats, y: Floats) -> float:
    """Largest violation of the optimality conditions by a primal v and a dual y."""
    rows = program.k @ v
    beyond = np.maximum(rows - numbers.upper, 0) + np.maximum(numbers.lower - rows, 0)
    idle_up = np.minimum(np.maximum(y, 0), np.maximum(numbers.upper - rows, 0))
    idle_low = np.minimum(np.maximum(-y, 0), np.maximum(rows - numbers.lower, 0))
    slope = program.p @ v + numbers.g + program.k.T @ y
    return float(max(abs(part).max(initial=0.0) for part in (slope, beyond, idle_up, idle_low)))


class _Qpalm:
    """Set up once, warm from the last period."""

    def __init__(self, program: Program, usual: RowData) -> None:
        qpalm = load(SOLVER)
        numbers = program.numbers(program.rest, usual)
        data = qpalm.Data(program.p.shape[0], program.k.shape[0])
        data.Q, data.A, data.q = program.p, program.k, numbers.g
        data.bmin, data.bmax = self._ends(numbers)
        settings = qpalm.Settings()
        settings.eps_abs = settings.eps_rel = SOLVER_TOLERANCE
        settings.verbose = 0
        self._solver: Any = qpalm.Solver(data, settings)
        self._last: tuple[Floats, Floats] | None = None

    def solve(self, measured: Measured, data: RowData, numbers: Numbers) -> tuple[Floats, Floats]:
        self._solver.update_q(numbers.g)
        self._solver.update_bounds(*self._ends(numbers))
        if self._last is not None:
            self._solver.warm_start(*self._last)
        self._solver.solve()
        self._last = np.array(self._solver.solution.x), np.array(self._solver.solution.y)
        return self._last

    @staticmethod
    def _ends(numbers: Numbers) -> tuple[Floats, Floats]:
        return np.maximum(numbers.lower, -UNBOUNDED), np.minimum(numbers.upper, UNBOUNDED)


class _Clarabel:
    """Set up afresh every period: here only the answer matters."""

    def __init__(self, program: Program, usual: RowData) -> None:
        self._program = OneSided.build(program, usual)

    def solve(self, measured: Measured, data: RowData, numbers: Numbers) -> tuple[Floats, Floats]:
        clarabel, program = load("clarabel"), self._program
        g, bound = program.vectors(measured, data)
        equations = program.whole.equations
        settings = clarabel.DefaultSettings()
        settings.verbose = False
        settings.tol_gap_abs = settings.tol_gap_rel = settings.tol_feas = TIGHTEST_TOLERANCE
        cones = [clarabel.ZeroConeT(equations), clarabel.NonnegativeConeT(len(bound) - equations)]
        solution = clarabel.DefaultSolver(program.upper_p, g, program.k, bound, cones, settings).solve()
        dual = np.asarray(solution.z)
        y = np.zeros(program.whole.k.shape[0])
        y[:equations] = dual[:equations]
        y[program.up] += dual[equations : equations + len(program.up)]
        y[program.low] -= dual[equations + len(program.up) :]
        return np.asarray(solution.x), y


def solver_in_use() -> str:
    """Who computes the truths here, for the report."""
    return "QPALM" if available(SOLVER) else "Clarabel in its tightest setting (QPALM is not installed)"
