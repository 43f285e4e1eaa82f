"""The last look before the wire: nothing passes that is not finite, inside its limits, its rate and authority's band.

Independent of the controller: it trusts neither the synthesis nor the row data nor the hold actions, only the plant
file and what was written last. For one input v, engineering units, with w the width of its span:

    room    [lo, hi] = hard limits  ∩  [last − rate Ts, last + rate Ts]  ∩  band
    v inside the room                      passes unchanged
    v outside by at most `tolerance` · w   is moved to the nearest edge: rounding
    anything else                          is refused: whoever made it is wrong, and clipping would hide that

A section passes or is refused as a whole, because its inputs were computed together: one refused value refuses them
all. `tolerance` is a millionth of the span, far above the rounding of any conversion, far below anything a plant feels.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum
from math import inf, isfinite, nan

import numpy as np

from controllers.arrays import Bools, Floats
from gateway.plantfile.plant import Signal

TOLERANCE_SPANS = 1e-6
NO_BAND = (-inf, inf)


class Fault(StrEnum):
    """Why a value was refused."""

    NOT_FINITE = "it is not a finite number"
    NO_REFERENCE = "nobody knows what was written last, so its rate cannot be judged"
    NO_ROOM = "no value satisfies hard limits, rate and authority's band at once; take authority again at what is there"
    HARD_LIMIT = "it lies outside the hard limits"
    BAND = "it lies outside authority's band"
    RATE = "it moves faster than the rate limit"


@dataclass(frozen=True, slots=True)
class Guarded:
    """What may be written.

    Attributes:
        values: (m,) engineering units, NaN for every input of a refused section.
        refused: (N,) sections of which nothing may be written.
        faults: by tag, why a value was refused.
        clipped: tags whose value was moved to an edge within the tolerance.
    """

    values: Floats
    refused: Bools
    faults: Mapping[str, Fault]
    clipped: tuple[str, ...]


class Guard:
    """The last look at one plant's inputs.

    Args:
        inputs: the m driven signals.
        sections: names of all N sections, in the order verdicts are given.
        period_s: Ts, seconds.
        tolerance_spans: how far outside is still rounding.

    Raises:
        ValueError: the period or the tolerance is no such number, or an input belongs to none of the sections.
    """

    def __init__(
        self,
        inputs: Sequence[Signal],
        sections: Sequence[str],
        period_s: float,
        tolerance_spans: float = TOLERANCE_SPANS,
    ) -> None:
        if not (isfinite(period_s) and period_s > 0):
            raise ValueError(f"period_s = {period_s}: a period must be a positive number of seconds")
        if not 0 <= tolerance_spans < 1:
            raise ValueError(f"tolerance_spans = {tolerance_spans}: must be a fraction of span, at least 0, below 1")
        places = {name: i for i, name in enumerate(sections)}
        for signal in inputs:
            if signal.section not in places:
                raise ValueError(f"{signal.tag}: section {signal.section} is not among those given: {list(places)}")
        self._inputs = tuple(inputs)
        self._section_of = np.array([places[signal.section] for signal in inputs], dtype=np.intp)
        self._sections = len(places)
        self._period_s = period_s
        self._tolerance_spans = tolerance_spans

    def check(self, wanted: Floats, last: Floats, bands: Mapping[str, tuple[float, float]]) -> Guarded:
        """Look at what is about to be written.

        Args:
            wanted: (m,) engineering units; whatever it holds.
            last: (m,) what was written last or found at take-over; not finite where unknown.
            bands: authority's band by tag; an absent tag has none.

        Raises:
            ValueError: `wanted` or `last` is not of shape (m,).
        """
        for name, given in (("wanted", wanted), ("last", last)):
            if np.shape(given) != (len(self._inputs),):
                raise ValueError(f"{name} has shape {np.shape(given)}: give one value for each of {len(self._inputs)}")
        values = np.full(len(self._inputs), nan)
        refused = np.zeros(self._sections, dtype=bool)
        faults: dict[str, Fault] = {}
        clipped = []
        for k, signal in enumerate(self._inputs):
            judged = self._judge(signal, float(wanted[k]), float(last[k]), bands.get(signal.tag, NO_BAND))
            if isinstance(judged, Fault):
                faults[signal.tag] = judged
                refused[self._section_of[k]] = True
                continue
            values[k] = judged
            if judged != wanted[k]:
                clipped.append(signal.tag)
        values[refused[self._section_of]] = nan
        return Guarded(values, refused, faults, tuple(clipped))

    def _judge(self, signal: Signal, value: float, last: float, band: tuple[float, float]) -> float | Fault:
        """The value to write, or why there is none."""
        if not isfinite(value):
            return Fault.NOT_FINITE
        walls = [(Fault.HARD_LIMIT, signal.hard), (Fault.BAND, band)]
        if signal.rate_per_s != inf:
            if not isfinite(last):
                return Fault.NO_REFERENCE
            most = signal.rate_per_s * self._period_s
            walls.append((Fault.RATE, (last - most, last + most)))
        # Comparisons are written so that a NaN in a limit refuses.
        if not all(low <= high for _, (low, high) in walls):
            return Fault.NO_ROOM
        lowest, highest = max(low for _, (low, _) in walls), min(high for _, (_, high) in walls)
        if not lowest <= highest:
            return Fault.NO_ROOM
        slack = self._tolerance_spans * signal.width
        for fault, (low, high) in walls:
            if not low - slack <= value <= high + slack:
                return fault
        return min(max(value, lowest), highest)
