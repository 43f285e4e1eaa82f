"""SCS, operator splitting on the homogeneous embedding: factorisation kept, b and c updated, warm by itself.

Its cone program is minimise 1/2 v'Pv + c'v over A v + s = b, s in {0} x R+: every two-sided row becomes two.
"""

from __future__ import annotations

from typing import Any

from controllers.plans import Measured
from controllers.rows import RowData
from tests.races.program import OneSided
from tests.races.racers.protocol import Answer, Entry, Family, Setup, load


class Running:
    """A solver that was set up."""

    def __init__(self, program: OneSided, setup: Setup, usual: RowData) -> None:
        self._program, self._setup, self._usual = program, setup, usual
        self._solver: Any = None
        self._warm = False
        self.forget()

    def solve(self, measured: Measured, data: RowData) -> Answer:
        """Update two vectors and solve."""
        g, bound = self._program.vectors(measured, data)
        self._solver.update(b=bound, c=g)
        result = self._solver.solve(warm_start=self._warm)
        self._warm = True
        info = result["info"]
        return Answer(result["x"][self._program.whole.inputs], int(info["iter"]), info["status"] == "solved")

    def forget(self) -> None:
        """Set up afresh."""
        g, bound = self._program.vectors(self._program.whole.rest, self._usual)
        data = {"P": self._program.upper_p, "A": self._program.k, "b": bound, "c": g}
        cone = {"z": self._program.whole.equations, "l": len(bound) - self._program.whole.equations}
        self._warm = False
        self._solver = load("scs").SCS(
            data,
            cone,
            eps_abs=self._setup.tolerance,
            eps_rel=self._setup.tolerance,
            max_iters=20_000,
            verbose=False,
            **self._setup.tuning,
        )


ENTRY = Entry(
    name="SCS",
    family=Family.SPLITTING,
    package="scs",
    enter=lambda contest, setup: Running(OneSided.build(contest.program, contest.usual), setup, contest.usual),
    tolerances=tuple(10 ** (-k / 2) for k in range(4, 17)),
    tunings=(
        {"acceleration_lookback": 10},
        {"acceleration_lookback": 0},
        {"acceleration_lookback": 10, "scale": 1.0},
        {"acceleration_lookback": 10, "scale": 1.0, "adaptive_scale": False},
        {"acceleration_lookback": 10, "scale": 10.0, "adaptive_scale": False},
    ),
)
