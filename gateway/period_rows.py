"""The row numbers of one period: targets, limits, and what held inputs will do.

A driving section may move its inputs between its hard limits, inside the authority's band, and at first no faster than
its rate allows from what was written last. Every other input is given: lower limit equals upper limit, along the path
its hold takes, and all neighbours plan around it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import inf

import numpy as np

from controllers import RowData
from controllers.arrays import Floats
from gateway.design import PlantDesign, move_of


@dataclass(frozen=True)
class InputPath:
    """What is known of one input before the synthesis, engineering units.

    Attributes:
        last: what was written last.
        given: (T,) values it will take whatever the synthesis says, None when the synthesis decides.
        band: authority's band around the input found at take-over.
    """

    last: float
    given: Floats | None
    band: tuple[float, float] = (-inf, inf)


def period_rows(design: PlantDesign, paths: Sequence[InputPath], targets: Mapping[str, float]) -> RowData:
    """Row numbers of one period.

    Args:
        paths: one per input, in the order of u.
        targets: measured signal's tag -> target, engineering units.
    """
    table, scaling = design.synthesis.table, design.scaling
    zeros = dict(zip((s.tag for s in design.outputs), zip(scaling.y_zero, scaling.y_width, strict=True), strict=True))
    data = table.retarget(
        table.data(), {tag: (value - zeros[tag][0]) / zeros[tag][1] for tag, value in targets.items()}
    )
    limits: dict[str, tuple[Floats, Floats]] = {}
    steps = table.horizon
    for k, (signal, path) in enumerate(zip(design.inputs, paths, strict=True)):
        if path.given is not None:
            held = (path.given - scaling.u_zero[k]) / scaling.u_width[k]
            limits[signal.tag] = (held, held)
            limits[move_of(signal)] = (np.full(steps, -inf), np.full(steps, inf))
            continue
        low, high = max(signal.hard[0], path.band[0]), min(signal.hard[1], path.band[1])
        most = signal.rate_per_s * design.plant.period_s
        lower, upper = np.full(steps, low), np.full(steps, high)
        lower[0] = min(max(low, path.last - most), high)
        upper[0] = max(min(high, path.last + most), low)
        limits[signal.tag] = (
            (lower - scaling.u_zero[k]) / scaling.u_width[k],
            (upper - scaling.u_zero[k]) / scaling.u_width[k],
        )
    return table.confine(data, limits)
