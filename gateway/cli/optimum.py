"""How far the localized optimum is from that of the whole plant, on sampled states.

Locality costs something: a section may not use what happens farther away than d couplings. What it costs shows in the
inputs of the first period, which are all that is ever applied:

    distance = max over samples and inputs |u_0 localized − u_0 whole plant|,   in spans

Both problems have the very same rows. The localized one is iterated without a budget, the other is solved by an
interior-point method (`controllers.central`).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from controllers import Measured, Outcome, ReferenceSolveError
from controllers.arrays import Floats
from controllers.central import solve_central
from gateway.design import PlantDesign
from gateway.period_rows import InputPath, period_rows

SAMPLES = 8
MOST_SAMPLED_ROWS = 20_000
"""Rows of all samples together: a large plant is sampled less often."""

SEED = 2
STATE_SPREAD, INPUT_SPREAD, DISTURBANCE_SPREAD = 0.1, 0.2, 0.002
"""Standard deviations of the samples, scaled units of `gateway.design`."""

TOLERANCE_SPANS = 1e-9
MOST_ITERATIONS = 100_000


@dataclass(frozen=True)
class Distance:
    """The largest distance found.

    Attributes:
        spans: of the first inputs.
        samples: states it was looked for at.
        unsettled: samples at which one of the two problems was not solved to the end; they count as nothing.
    """

    spans: float
    samples: int
    unsettled: int


def distance_from_whole_plant(design: PlantDesign) -> Distance:
    """Solve both problems at seeded random states."""
    rng = np.random.default_rng(SEED)
    samples = max(2, min(SAMPLES, MOST_SAMPLED_ROWS // design.synthesis.table.count))
    distances = [_distance(design, rng) for _ in range(samples)]
    settled = [distance for distance in distances if distance is not None]
    return Distance(max(settled, default=float("nan")), samples, samples - len(settled))


def _distance(design: PlantDesign, rng: np.random.Generator) -> float | None:
    table, scaling, network = design.synthesis.table, design.scaling, design.network
    u_before = rng.normal(scale=INPUT_SPREAD, size=network.b.shape[1])
    engineering = _inside(design, scaling.u_back(u_before))
    measured = Measured(
        rng.normal(scale=STATE_SPREAD, size=network.a.shape[0]),
        rng.normal(scale=DISTURBANCE_SPREAD, size=network.e.shape[1]),
        scaling.u(engineering),
    )
    data = period_rows(design, [InputPath(float(value), None) for value in engineering], {})
    unlimited = replace(design.synthesis, settings=replace(design.synthesis.settings, tolerance_spans=TOLERANCE_SPANS))
    plan, _ = unlimited.solve(measured, data, max_iterations=MOST_ITERATIONS)
    if plan.outcome is not Outcome.CONVERGED:
        return None
    try:
        rows = solve_central(table, measured, data)
    except ReferenceSolveError:
        return None
    whole = np.array([rows[table.rows_of(signal.tag).start] for signal in design.inputs])
    return float(np.abs(plan.inputs - whole).max())


def _inside(design: PlantDesign, engineering: Floats) -> Floats:
    """Last inputs a plant can have had: inside their hard limits."""
    low = np.array([signal.hard[0] for signal in design.inputs])
    high = np.array([signal.hard[1] for signal in design.inputs])
    return np.clip(engineering, low, high)
