"""What a solve is given, how it is set, and what it returns; symbols as in `controllers.synthesis`."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np

from controllers.arrays import Floats
from controllers.row_rule import Region


class Outcome(Enum):
    """How a solve ended. All but the last return a plan that obeys every hard limit."""

    CONVERGED = "converged"
    OUT_OF_TIME = "out of time"
    OUT_OF_ITERATIONS = "out of iterations"
    NOT_FINITE = "not finite"


@dataclass(frozen=True)
class Settings:
    """Settings of the iteration; none of them moves the optimum.

    Attributes:
        rho: penalty of the split, cost per span squared.
        relax: over-relaxation, in (0, 2).
        chunk: passes between two looks at the clock and the residuals.
        tolerance_spans: largest primal residual and last change of the plan, in spans, called converged.
        max_iterations: most passes of one solve.
        pull_passes: column steps that pull a shifted plan onto a new measurement.
    """

    rho: float = 0.3
    relax: float = 1.6
    chunk: int = 5
    tolerance_spans: float = 1e-3
    max_iterations: int = 400
    pull_passes: int = 3


@dataclass(frozen=True)
class Measured:
    """What one period starts from: states (n,), disturbances, inputs written last (m,).

    Disturbances are held over the horizon, (r,), or forecast for every step of it, (T, r), step t acting on x_{t+1}.
    """

    x: Floats
    w: Floats
    u_before: Floats


@dataclass(frozen=True)
class Iterate:
    """State of the iteration between periods, weighted rows (R,) each."""

    z: Floats
    y: Floats
    l: Floats  # noqa: E741 - the symbol of the synthesis' head

    @property
    def finite(self) -> bool:
        """Whether every number is finite; what is not must never reach the next period."""
        return all(bool(np.isfinite(part).all()) for part in (self.z, self.y, self.l))


@dataclass(frozen=True)
class Plan:
    """What a solve returns.

    Attributes:
        outcome: how it ended.
        iterations: passes run.
        rows: the row copy z, (R,) in spans.
        inputs: first inputs, (m,) in the network's units; NaN where an input has no quantity.
        region: for every input, at which limit its first value rests.
        primal: largest |z − y| of every section, (N,) in spans.
        change: largest change of y in the last pass of every section, (N,) in spans.
        stalled: whether a solve that did not converge stood still in the end: most likely hard limits contradict each
            other, and `controllers.contradiction` says which. That takes longer than a period has.
    """

    outcome: Outcome
    iterations: int
    rows: Floats
    inputs: Floats
    region: tuple[Region, ...]
    primal: Floats
    change: Floats
    stalled: bool = False

    @property
    def residual(self) -> Floats:
        """Larger of the two residuals of every section, (N,) in spans."""
        return np.maximum(self.primal, self.change)
