"""How a solve ended: the plan read off the iterate, and whether it was getting anywhere."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from controllers.arrays import Floats
from controllers.plans import Outcome, Plan
from controllers.quantities import Of
from controllers.row_rule import Region
from controllers.rows import RowData, RowTable

STALL_LOOKS = 4
"""Fewest looks at the residuals in either half of a solve that can be called stalled."""
STALL_SHARE = 0.1
"""Share of the primal residual below which the plan's change counts as standing still."""

Looks = Sequence[tuple[float, float]]
"""Primal residual and change at every look of a solve, in spans."""


def plan_of(
    table: RowTable,
    z: Floats,
    y: Floats,
    change: Floats,
    data: RowData,
    iterations: int,
    outcome: Outcome,
    looks: Looks,
) -> Plan:
    """Read the plan off row copy, column copy and last change, weighted rows (R,) each."""
    root = np.sqrt(table.weight)
    rows = np.clip(z / root, data.lower, data.upper)
    finite = bool(np.isfinite(rows).all() and np.isfinite(y).all())
    inputs, region = first_inputs(table, rows, data)
    return Plan(
        outcome=outcome if finite else Outcome.NOT_FINITE,
        iterations=iterations,
        rows=rows,
        inputs=inputs if finite else np.full_like(inputs, np.nan),
        region=region,
        primal=_by_section((z - y) / root, table),
        change=_by_section(change / root, table),
        stalled=finite and outcome is not Outcome.CONVERGED and stalled(looks),
    )


def first_inputs(table: RowTable, rows: Floats, data: RowData) -> tuple[Floats, tuple[Region, ...]]:
    """First value of every input that is a quantity by itself, and which limit it rests on.

    An input that several quantities show takes the first one's value, inside the limits of all.
    """
    net = table.network
    inputs = np.full(net.b.shape[1], np.nan)
    lower, upper = np.full_like(inputs, -np.inf), np.full_like(inputs, np.inf)
    for quantity in table.quantities:
        mixed = np.flatnonzero(quantity.mix)
        if quantity.of is not Of.INPUT or len(mixed) != 1 or quantity.plus:
            continue
        row = table.rows_of(quantity.name).start
        k = int(net.u_at[net.index(quantity.section)] + mixed[0])
        unit = quantity.span / quantity.mix[mixed[0]]
        low, high = sorted((data.lower[row] * unit, data.upper[row] * unit))
        lower[k], upper[k] = max(lower[k], low), min(upper[k], high)
        inputs[k] = rows[row] * unit if np.isnan(inputs[k]) else inputs[k]
    inputs = np.clip(inputs, lower, upper)
    at_lower, at_upper = inputs <= lower, inputs >= upper
    return inputs, tuple(
        Region.LOWER if low else Region.UPPER if high else Region.FREE
        for low, high in zip(at_lower, at_upper, strict=True)
    )


def stalled(looks: Looks) -> bool:
    """Whether the plan stands still and its copies stay apart, as they must where hard limits contradict each other.

    Then z − y tends to a constant that is not zero, while without a contradiction it tends to zero together with the
    change: Banjac, Goulart, Stellato and Boyd, J. Optim. Theory Appl. 183 (2019) 490-519.

    Args:
        looks: of the solve, in order.
    """
    half = len(looks) // 2
    if half < STALL_LOOKS:
        return False
    earlier, later = (min(primal for primal, _ in part) for part in (looks[:half], looks[half:]))
    return later > 0.9 * earlier and looks[-1][1] < STALL_SHARE * looks[-1][0]


def _by_section(spans: Floats, table: RowTable) -> Floats:
    worst = np.zeros(table.network.size)
    with np.errstate(invalid="ignore"):  # not a number is an outcome of its own
        np.maximum.at(worst, table.section, np.abs(spans))
    return worst
