"""What a closed loop has to answer to, with the truth of every period.

The plant starts off its targets and is driven by the exact inputs, so that all racers meet the same problems and each
answer can be held against the truth. Every period the disturbances of some sections change, and every few periods the
targets of some others; both are known to the racers, as an observer and a person would tell them.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from controllers.arrays import Floats
from controllers.plans import Measured
from controllers.rows import RowData
from tests.races.contest import Contest
from tests.races.truth import Truth

DISTURBED = 0.2  # fraction of the sections whose disturbance changes in a period
RETARGETED = 0.1  # fraction of the sections whose target changes ...
RETARGET_EVERY = 5  # ... every so many periods


@dataclass(frozen=True)
class Stretch:
    """One period: what is measured and wanted, and the exact first inputs (m,)."""

    measured: Measured
    data: RowData
    truth: Floats


def course(contest: Contest, periods: int, *, seed: int = 7) -> tuple[Stretch, ...]:
    """Drive the plant for so many periods by the truth."""
    truth = Truth(contest.program, contest.usual)
    stretches = []
    events = _events(contest, seed)
    measured, data = next(events)
    for _ in range(periods):
        inputs = truth.solve(measured, data)
        stretches.append(Stretch(measured, data, inputs))
        state = contest.next_state(measured, inputs)
        later, data = next(events)
        measured = Measured(state, later.w, inputs)
    return tuple(stretches)


def _events(contest: Contest, seed: int) -> Iterator[tuple[Measured, RowData]]:
    """Disturbances and targets period by period; the first one carries the initial state, too."""
    plant, table = contest.plant, contest.table
    rng = np.random.default_rng(seed)
    n, m = plant.network.b.shape
    w, data = plant.disturbance * rng.normal(size=len(plant.disturbance)), contest.usual
    yield Measured(plant.start * rng.normal(size=n), w, np.zeros(m)), data
    period = 0
    while True:
        period += 1
        changed = rng.random(len(w)) < DISTURBED
        w = np.where(changed, plant.disturbance * rng.normal(size=len(w)), w)
        if period % RETARGET_EVERY == 0:
            names = [name for name in plant.steered if rng.random() < RETARGETED]
            data = table.retarget(data, {name: float(rng.uniform(-1, 1)) * plant.target for name in names})
        yield Measured(np.zeros(n), w, np.zeros(m)), data
