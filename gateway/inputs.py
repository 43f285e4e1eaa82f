"""From the hold states to the inputs: what each is known to do before the synthesis, and what it is told after it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import isfinite

import numpy as np

from controllers.arrays import Floats
from gateway.design import PlantDesign
from gateway.hold import Writes
from gateway.panel_view import PanelView
from gateway.period_rows import InputPath
from gateway.safe_hold import next_inputs, path


def intended_paths(
    design: PlantDesign,
    intentions: Sequence[Writes],
    in_charge: Sequence[bool],
    last: Floats,
    bands: Mapping[str, tuple[float, float]],
) -> list[InputPath]:
    """Say of every input, before the synthesis, whether the synthesis decides it or what it will do instead.

    Args:
        intentions: per section, what it writes if this period is on time.
        in_charge: per section, whether our inputs reach its actuators.
        last: what each input was told last, engineering units; NaN when unknown.
        bands: authority's band by tag, absent without one.
    """
    steps, period_s = design.synthesis.table.horizon, design.plant.period_s
    paths = []
    for k, (signal, i) in enumerate(zip(design.inputs, design.section_of_input, strict=True)):
        known = float(last[k]) if isfinite(last[k]) else float(design.scaling.u_zero[k])
        band = bands.get(signal.tag, signal.hard)
        if intentions[i] in (Writes.SYNTHESIS, Writes.NOTHING):
            paths.append(InputPath(known, None, band))
            continue
        ahead = (
            path(signal, known, period_s, steps, band) if intentions[i] is Writes.SAFE_HOLD and in_charge[i] else None
        )
        paths.append(InputPath(known, np.full(steps, known) if ahead is None else np.asarray(ahead), band))
    return paths


@dataclass(frozen=True)
class Outgoing:
    """One section's part of a set: its values by tag, and whether to take it, leave it, or hand it back."""

    values: Mapping[str, float]
    take: bool = False
    hand_back: bool = False


LEFT_ALONE = Outgoing({})


def outgoing_of(
    design: PlantDesign,
    i: int,
    action: Writes,
    wanted: Floats | None,
    last: Floats,
    view: PanelView,
    bands: Mapping[str, tuple[float, float]],
) -> Outgoing:
    """What section i sends: the synthesis' inputs, its last ones, its safe hold, or nothing.

    Args:
        action: by its hold state.
        wanted: inputs of the synthesis (m,), engineering units; None when there are none.
        last: what each input was told last (m,).
        view: the panel, this period.
        bands: authority's band by tag, which a ramp keeps to as well.
    """
    if action is Writes.NOTHING or not view.permit:
        return LEFT_ALONE
    places = [k for k, section in enumerate(design.section_of_input) if section == i]
    signals = [design.inputs[k] for k in places]
    if action is Writes.SAFE_HOLD:
        if not view.in_charge[i]:
            return LEFT_ALONE  # The panel drives it already; only a rearm takes it back.
        told = {s.tag: float(last[k]) for s, k in zip(signals, places, strict=True) if isfinite(last[k])}
        held = next_inputs(signals, told, design.plant.period_s, bands)
        return Outgoing({}, hand_back=True) if held.hand_back else Outgoing(held.values)
    source = last if action is Writes.LAST_WRITTEN or wanted is None else wanted
    values = {s.tag: float(source[k]) for s, k in zip(signals, places, strict=True)}
    if action is Writes.LAST_WRITTEN and not all(isfinite(value) for value in values.values()):
        return LEFT_ALONE
    return Outgoing(values, take=not view.in_charge[i])
