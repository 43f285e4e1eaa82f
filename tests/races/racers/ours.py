"""This synthesis, as the gateway calls it."""

from __future__ import annotations

from dataclasses import replace

from controllers.plans import Iterate, Measured, Outcome, Settings
from controllers.rows import RowData
from tests.races.contest import Contest
from tests.races.racers.protocol import Answer, Entry, Family, Setup


class Running:
    """The design and the last iterate."""

    def __init__(self, contest: Contest, setup: Setup) -> None:
        settings = Settings(tolerance_spans=setup.tolerance, max_iterations=3000, **setup.tuning)
        self._design = replace(contest.design, settings=settings)
        self._before: Iterate | None = None

    def solve(self, measured: Measured, data: RowData) -> Answer:
        """One solve, warm from the last."""
        plan, self._before = self._design.solve(measured, data, self._before)
        return Answer(plan.inputs, plan.iterations, plan.outcome is Outcome.CONVERGED)

    def forget(self) -> None:
        """Start cold."""
        self._before = None


def held_bytes(contest: Contest) -> int:
    """Bytes of the design's arrays, each counted once however many sections share it."""
    design, flat = contest.design, contest.design.flat
    arrays = [flat.touched, flat.at, flat.basis, flat.basis_at, flat.freedom, design.copies]
    for response in design.responses:
        arrays += [response.rows, response.gain, response.basis]
    return sum({id(array): array.nbytes for array in arrays}.values())


ENTRY = Entry(
    name="this synthesis",
    family=Family.LOCALIZED,
    package="controllers",
    enter=Running,
    tolerances=tuple(10 ** (-k / 3) for k in range(4, 19)),
    held_bytes=held_bytes,
    tunings=tuple({"rho": rho, "relax": relax, "chunk": 3} for rho in (1.0, 2.5, 5.0, 10.0) for relax in (1.6, 1.8)),
)
