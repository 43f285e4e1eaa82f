"""Which hard limits contradict each other, and by how much: asked when a solve stalls, outside the sampling period.

With limits that cannot all be met no plan exists, the iteration has no fixed point, and its residual stalls
(`Plan.stalled`). Then every hard limit is made elastic over the whole plant, in spans, and the least total stretch is
looked for, a linear program:

    minimise    sum_r g_r s_r      over x_{1..T}, u_{0..T-1}, s ≥ 0
    subject to  x_{t+1} = A x_t + B u_t + E w,     lo_r − s_r ≤ z_r ≤ hi_r + s_r

Limits that stretch are those that must give way. Limits that do not, but have a multiplier, are those they give way to:
without them the stretch would be smaller. Inputs and moves cost `INPUT_GRIP` times more to stretch than the rest, so
that outputs give way first where that is enough: the plant cannot do more anyway. The elastic program and what its
multipliers say about infeasibility: Chinneck, "Feasibility and Infeasibility in Optimization", Springer 2008, ch. 6.
"""

from __future__ import annotations

from dataclasses import dataclass

import clarabel
import numpy as np
from scipy import sparse

from controllers.arrays import Floats
from controllers.central import dynamics
from controllers.exceptions import ReferenceSolveError
from controllers.finite import require_finite
from controllers.plans import Measured
from controllers.row_rule import Region
from controllers.rows import RowData, RowTable

INPUT_GRIP = 100.0
STRETCH_TOLERANCE_SPANS = 1e-6
MULTIPLIER_TOLERANCE = 1e-4
MOST_NAMED = 5


@dataclass(frozen=True)
class Limit:
    """One side of a quantity's hard limits.

    Attributes:
        quantity: its name.
        side: which limit.
        step: where it matters most, row k = 0..T−1 of the quantity.
        stretch: by how much it must give way there, in the quantity's unit; 0 for a limit that holds.
        total_spans: sum of its stretch over the horizon, in spans.
    """

    quantity: str
    side: Region
    step: int
    stretch: float
    total_spans: float

    def __str__(self) -> str:
        side = "lower" if self.side is Region.LOWER else "upper"
        if self.stretch == 0:
            return f"{side} limit of {self.quantity!r} (step {self.step})"
        return f"{side} limit of {self.quantity!r} by {self.stretch:.3g} at step {self.step}"


@dataclass(frozen=True)
class Contradiction:
    """Limits that cannot all be met: those that must give way, worst first, and those they give way to."""

    broken: tuple[Limit, ...]
    against: tuple[Limit, ...]

    def __str__(self) -> str:
        broken, against = (
            "; ".join([str(limit) for limit in limits[:MOST_NAMED]])
            + (f"; and {len(limits) - MOST_NAMED} more" if len(limits) > MOST_NAMED else "")
            for limits in (self.broken, self.against)
        )
        return f"hard limits contradict each other: {broken} must give way" + (f" to {against}" if against else "")


def find_contradiction(table: RowTable, measured: Measured, data: RowData) -> Contradiction | None:
    """Find which hard limits contradict each other, None when all can be met together.

    Args:
        table: the rows, `Design.table`.
        measured: what the period started from.
        data: the row numbers it was solved with.

    Raises:
        NotFiniteError: a measurement is not finite, or a limit is NaN.
        ReferenceSolveError: the solver gave up; carries its status.
    """
    require_finite(table, measured, data)
    qx, qu, qp = table.maps
    before = qp @ measured.u_before
    up, low = np.flatnonzero(np.isfinite(data.upper)), np.flatnonzero(np.isfinite(data.lower))
    if len(up) + len(low) == 0:
        return None
    z_map = sparse.hstack([qx, qu], format="csr")
    limits = sparse.vstack([z_map[up], -z_map[low]], format="csr")
    room = np.concatenate([(data.upper - before)[up], (before - data.lower)[low]])
    stretch, multiplier = _least_stretch(
        dynamics(table, measured), limits, room, _grip(table)[np.concatenate([up, low])]
    )
    sides = ((Region.UPPER, up, slice(0, len(up))), (Region.LOWER, low, slice(len(up), len(room))))
    broken: list[Limit] = []
    against: list[tuple[float, Limit]] = []
    for side, rows, part in sides:
        by_row = np.zeros((2, table.count))
        by_row[:, rows] = stretch[part], multiplier[part]
        for quantity, (given, force) in zip(
            table.quantities, by_row.reshape(2, -1, table.horizon).transpose(1, 0, 2), strict=True
        ):
            if given.max() > STRETCH_TOLERANCE_SPANS:
                step = int(given.argmax())
                broken.append(Limit(quantity.name, side, step, float(given[step]) * quantity.span, float(given.sum())))
            elif force.max() > MULTIPLIER_TOLERANCE:
                against.append((float(force.max()), Limit(quantity.name, side, int(force.argmax()), 0.0, 0.0)))
    if not broken:
        return None
    return Contradiction(
        broken=tuple(sorted(broken, key=lambda limit: -limit.total_spans)),
        against=tuple(limit for _, limit in sorted(against, key=lambda pair: -pair[0])),
    )


def _grip(table: RowTable) -> Floats:
    """What a span of stretch costs, (R,)."""
    per = [1.0 if any(term.of.ahead for term in q.terms) else INPUT_GRIP for q in table.quantities]
    return np.repeat(per, table.horizon)


def _least_stretch(
    plant: tuple[sparse.csr_array, Floats], limits: sparse.csr_array, room: Floats, grip: Floats
) -> tuple[Floats, Floats]:
    """Stretch and multiplier of every limit, limits (x, u) <= room + stretch."""
    count = len(room)
    equal, driven = plant
    none = sparse.csr_array((len(driven), count))
    eye = sparse.eye_array(count)
    constraints = sparse.block_array(
        [[equal, none], [limits, -eye], [None, -eye]],
        format="csc",
    )
    size = constraints.shape[1]
    settings = clarabel.DefaultSettings()
    settings.verbose = False
    settings.tol_gap_abs = settings.tol_gap_rel = settings.tol_feas = 1e-9
    solution = clarabel.DefaultSolver(
        sparse.csc_matrix((size, size)),
        np.concatenate([np.zeros(size - count), grip]),
        sparse.csc_matrix(constraints),
        np.concatenate([driven, room, np.zeros(count)]),
        [clarabel.ZeroConeT(len(driven)), clarabel.NonnegativeConeT(2 * count)],
        settings,
    ).solve()
    if str(solution.status) not in ("Solved", "AlmostSolved"):
        raise ReferenceSolveError(f"the elastic program was not solved: {solution.status}; check the scaling of spans")
    multiplier = np.asarray(solution.z)[len(driven) : len(driven) + count]
    return np.maximum(np.asarray(solution.x)[-count:], 0.0), multiplier
