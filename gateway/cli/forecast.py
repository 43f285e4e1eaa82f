"""What one period will cost on this host: the real estimate and synthesis, timed on a short nominal closed loop.

The linear plant is moved by the inputs the synthesis gives, its outputs are measured with their noise, and every period
runs the code a period of the gateway runs. It starts off its targets, so that there is something to do, and a cold
first period is left out. Gathering and writing depend on the peer; `check --site` times those.

    budget    from the gather cut-off to the instant the kernels are told to stop: what is left when gathering takes
              all the time it may take
    headroom  1 − worst / budget
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from controllers import Estimate, Iterate, Measured
from gateway.clock import Clock
from gateway.deadline import Cutoff
from gateway.design import PlantDesign
from gateway.estimating import Seen, estimate_period
from gateway.period_rows import InputPath, period_rows
from gateway.worker import Job

PERIODS = 60
SEED = 1
START_SPANS = 0.05


@dataclass(frozen=True)
class Forecast:
    """Work of one period on this host, without gathering and writing.

    Attributes:
        median_ms, worst_ms: estimate and synthesis together.
        budget_ms: theirs when gathering takes all its time.
        median_iterations, most_iterations: passes of the synthesis.
        periods: timed.
    """

    median_ms: float
    worst_ms: float
    budget_ms: float
    median_iterations: float
    most_iterations: int
    periods: int

    @property
    def headroom(self) -> float:
        """Share of the budget the worst period left; negative when it did not fit."""
        return 1.0 - self.worst_ms / self.budget_ms


def forecast(design: PlantDesign, clock: Clock, periods: int = PERIODS) -> Forecast:
    """Time a nominal closed loop."""
    rng = np.random.default_rng(SEED)
    network, scaling = design.network, design.scaling
    noise = np.array([signal.noise / signal.width for signal in design.outputs])
    x = rng.normal(scale=START_SPANS, size=network.a.shape[0])
    u = scaling.u_zero.copy()
    known = np.zeros(network.e.shape[1])
    everything = np.ones(len(design.outputs), dtype=bool)
    nobody = np.zeros(network.size, dtype=bool)
    estimate: Estimate | None = None
    iterate: Iterate | None = None
    times_ns: list[int] = []
    passes: list[int] = []
    for _ in range(periods + 1):
        seen = Seen(network.c @ x + noise * rng.standard_normal(len(noise)), everything, known, nobody)
        began_ns = clock.monotonic_ns()
        estimate, _ = estimate_period(design, estimate, u, known, seen)
        data = period_rows(design, [InputPath(float(value), None) for value in u], {})
        job = Job(design.synthesis, Measured(estimate.x, estimate.w, scaling.u(u)), data, iterate)
        plan, iterate = job.solve(lambda _: True)
        times_ns.append(clock.monotonic_ns() - began_ns)
        passes.append(plan.iterations)
        u = scaling.u_back(plan.inputs)
        x = network.a @ x + network.b @ plan.inputs
    cut = Cutoff.of(0, round(design.plant.period_s * 1e9), design.plant.cutoffs)
    return Forecast(
        median_ms=float(np.median(times_ns[1:])) / 1e6,
        worst_ms=max(times_ns[1:]) / 1e6,
        budget_ms=(cut.stop_ns - cut.gather_ns) / 1e6,
        median_iterations=float(np.median(passes[1:])),
        most_iterations=max(passes[1:]),
        periods=periods,
    )
