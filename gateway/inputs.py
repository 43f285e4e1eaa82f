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
    acting: Floats,
    bands: Mapping[str, tuple[float, float]],
) -> list[InputPath]:
    """Say of every input, before the synthesis, whether the synthesis decides it or what it will do instead.

    Args:
        intentions: per section, what it writes if this period is on time.
        in_charge: per section, whether our inputs reach its actuators.
        acting: what each input is taken to do now (m,), engineering units.
        bands: authority's band by tag, absent without one.
    """
    steps, period_s = design.synthesis.table.horizon, design.plant.period_s
    paths = []
    for k, (signal, i) in enumerate(zip(design.inputs, design.section_of_input, strict=True)):
        known = float(acting[k])
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
    """One section's part of a set.

    Attributes:
        values: its inputs by tag, engineering units.
        take: whether to take the section from the panel with them.
        hand_back: whether to hand it back.
        abandoned: the panel shows it in control's charge, but this run never took it and only watches: whoever drove
            it is gone, and the panel must not be told otherwise.
    """

    values: Mapping[str, float]
    take: bool = False
    hand_back: bool = False
    abandoned: bool = False


LEFT_ALONE = Outgoing({})
HANDED_BACK = Outgoing({}, hand_back=True)
ABANDONED = Outgoing({}, abandoned=True)


def outgoing_of(
    design: PlantDesign,
    i: int,
    action: Writes,
    wanted: Floats | None,
    last: Floats,
    view: PanelView,
    bands: Mapping[str, tuple[float, float]],
    *,
    clean: bool,
    ours: bool,
    not_told: bool,
) -> Outgoing:
    """What section i sends: the synthesis' inputs, its last ones, its safe hold, or nothing.

    A section that the panel drives is taken in a clean period only. One on hold stays with the panel until a rearm,
    and goes back to it when its hold does not reach the actuators. One that is watched goes back if we had it.

    Args:
        action: by its hold state.
        wanted: inputs of the synthesis (m,), engineering units; None when there are none.
        last: what each input was told last (m,).
        view: the panel, this period.
        bands: authority's band by tag, which a ramp keeps to as well.
        clean: whether its period was on time so far.
        ours: whether this run took the section and did not hand it back.
        not_told: whether its last inputs have certainly not reached the actuators.
    """
    if action is Writes.NOTHING:
        return _watched(in_charge=view.in_charge[i] and design.plant.panel is not None, ours=ours)
    if not view.permit or (not view.in_charge[i] and (action is Writes.SAFE_HOLD or not clean)):
        return LEFT_ALONE
    places = [k for k, section in enumerate(design.section_of_input) if section == i]
    signals = [design.inputs[k] for k in places]
    if action is Writes.SAFE_HOLD:
        told = {s.tag: float(last[k]) for s, k in zip(signals, places, strict=True) if isfinite(last[k])}
        held = next_inputs(signals, told, design.plant.period_s, bands)
        return HANDED_BACK if held.hand_back or not_told else Outgoing(held.values)
    source = last if action is Writes.LAST_WRITTEN or wanted is None else wanted
    values = {s.tag: float(source[k]) for s, k in zip(signals, places, strict=True)}
    if action is Writes.LAST_WRITTEN and not all(isfinite(value) for value in values.values()):
        return LEFT_ALONE
    return Outgoing(values, take=not view.in_charge[i])


def _watched(*, in_charge: bool, ours: bool) -> Outgoing:
    """What a section that is only watched sends: nothing, but its charge goes back to the panel."""
    if not in_charge:
        return LEFT_ALONE
    return HANDED_BACK if ours else ABANDONED
