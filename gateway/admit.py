"""The quality of every reading, before the estimator sees any (runtime, section 2).

A reading is judged in this order, the first that applies stands: did not arrive, wrong type, bad status, not finite,
out of range, stale, frozen, jumped, uncertain status, good. What each means in numbers is told in
`gateway.admit_rules`. Whatever a peer sends leads to a quality, never to an exception.

State is explicit: `admit` takes the memory the last period left and returns the next one. A section is **blind** when a
measured signal of it was unusable for `blind_after` consecutive periods, or has never been usable. A lost measured
disturbance does not blind its section: the estimator then sees its effect as it sees any other disturbance.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import inf, isfinite

import numpy as np

from gateway.admit_rules import AdmitPlan, AdmitSettings, SignalRule, readings_until_frozen
from gateway.signals import MISSING, Quality, Reading
from gateway.status_codes import Severity, severity


@dataclass(frozen=True, slots=True)
class Admitted:
    """One judged reading.

    Attributes:
        value: engineering units; None unless the quality is usable.
        unusable: consecutive periods without a usable value, this one included; 0 when it is usable.
    """

    tag: str
    value: float | None
    quality: Quality
    unusable: int


@dataclass(frozen=True, slots=True)
class SignalMemory:
    """What is remembered of one signal from period to period, engineering units.

    Attributes:
        admitted: last usable value; None before the first.
        admitted_k: from when on it may have moved unseen: its period, that of a jump since, that of a freeze's begin.
        raw: last finite reading; None before the first.
        repeats: how many readings in a row equalled the one before them exactly.
        step: smallest difference between consecutive readings so far, infinite before the first.
        needed: equal readings that prove a freeze, from the noise; None when the noise says too little.
        beside: readings of the neighbours when the present run of equal readings began.
        server_ns: last server timestamp.
        still: how many readings in a row came with an unchanged server timestamp.
        level, level_for: the new level after a jump, and how many readings it has persisted.
        unusable: consecutive periods without a usable value.
    """

    admitted: float | None = None
    admitted_k: int = 0
    raw: float | None = None
    repeats: int = 0
    step: float = inf
    needed: int | None = None
    beside: tuple[float | None, ...] = ()
    server_ns: int | None = None
    still: int = 0
    level: float | None = None
    level_for: int = 0
    unusable: int = 0


@dataclass(frozen=True)
class AdmitMemory:
    """State of the admission after a period, signals in the order of the plan."""

    signals: tuple[SignalMemory, ...]
    panel_clock_ms: int | None = None
    panel_still: int = 0


@dataclass(frozen=True)
class Admission:
    """One period's judged readings, in the order of the plan, and the sections that are blind."""

    signals: tuple[Admitted, ...]
    blind: frozenset[str]

    def by_tag(self) -> dict[str, Admitted]:
        """The judged readings by tag."""
        return {signal.tag: signal for signal in self.signals}


def first_memory(plan: AdmitPlan) -> AdmitMemory:
    """State before the first reading: nothing is known."""
    return AdmitMemory(
        tuple(
            SignalMemory(needed=readings_until_frozen(rule.noise, rule.resolution, plan.settings.false_alarm))
            for rule in plan.rules
        )
    )


def admit(
    plan: AdmitPlan,
    memory: AdmitMemory,
    k: int,
    readings: Mapping[str, Reading],
    panel_clock_ms: int | None = None,
) -> tuple[Admission, AdmitMemory]:
    """Judge one period's readings.

    Args:
        plan: the rules.
        memory: what the period before left.
        k: period index.
        readings: by tag; a tag that is absent did not arrive.
        panel_clock_ms: the panel's clock, None when it could not be read; ignored for a plant without a panel.
    """
    moves = panel_clock_ms is not None and panel_clock_ms != memory.panel_clock_ms
    panel_still = 0 if moves or not plan.watches_panel else memory.panel_still + 1
    panel_gone = panel_still >= plan.settings.stale_after
    taken = [readings.get(rule.tag, MISSING) for rule in plan.rules]
    raws = [number(reading.value) for reading in taken]
    faults = [_fault_at_sight(*one) for one in zip(plan.rules, taken, raws, strict=True)]
    sound = [raw if fault is None else None for raw, fault in zip(raws, faults, strict=True)]
    judged, remembered, blind = [], [], set()
    for rule, before, reading, raw, fault in zip(plan.rules, memory.signals, taken, raws, faults, strict=True):
        beside = tuple(sound[position] for position in rule.neighbours)
        tracked = _track(rule, plan.settings, before, reading, raw, beside)
        quality = (
            fault
            or (Quality.STALE if panel_gone or _stale(plan.settings, before, tracked) else None)
            or (Quality.FROZEN if _frozen(plan, rule, tracked, beside) else None)
        )
        after, quality = _conclude(rule, plan.settings, tracked, k, raw, quality or _soundness(reading))
        judged.append(Admitted(rule.tag, raw if quality.usable else None, quality, after.unusable))
        remembered.append(after)
        if rule.sees and (after.admitted is None or after.unusable >= plan.blind_after):
            blind.add(rule.section)
    return (
        Admission(tuple(judged), frozenset(blind)),
        AdmitMemory(tuple(remembered), panel_clock_ms if moves else memory.panel_clock_ms, panel_still),
    )


def number(value: object) -> float | None:
    """A finite or infinite float for what a peer sent as a number, None for any other type (truth values included)."""
    if isinstance(value, bool) or not isinstance(value, int | float | np.integer | np.floating):
        return None
    try:
        return float(value)
    except OverflowError:
        return inf  # An integer beyond every float is no measurement either.


def _fault_at_sight(rule: SignalRule, reading: Reading, raw: float | None) -> Quality | None:
    """Judge what needs no memory."""
    if reading.value is None and reading == MISSING:
        return Quality.MISSING
    if raw is None or _severity(reading) is Severity.BAD:
        return Quality.BAD
    if not isfinite(raw):
        return Quality.NOT_FINITE
    return None if rule.low <= raw <= rule.high else Quality.OUT_OF_RANGE


def _soundness(reading: Reading) -> Quality:
    return Quality.UNCERTAIN if _severity(reading) is Severity.UNCERTAIN else Quality.GOOD


def _severity(reading: Reading) -> Severity:
    try:
        return severity(reading.status)
    except (ValueError, TypeError):
        return Severity.BAD  # Not a status code at all.


def _track(
    rule: SignalRule,
    settings: AdmitSettings,
    memory: SignalMemory,
    reading: Reading,
    raw: float | None,
    beside: tuple[float | None, ...],
) -> SignalMemory:
    """Follow repeats, resolution and timestamps, whatever the reading will be worth."""
    arrived = raw is not None and isfinite(raw)
    renewed = reading.server_ns is None or reading.server_ns != memory.server_ns
    repeats, step, needed, then = memory.repeats, memory.step, memory.needed, memory.beside
    if raw is not None and arrived and renewed:  # The same sample read twice is no repeat: it proves nothing.
        if raw == memory.raw:
            repeats += 1
        else:
            repeats, then = 0, beside
            if memory.raw is not None and (change := abs(raw - memory.raw)) < step:
                step = change
                resolution = max(rule.resolution, step)
                needed = readings_until_frozen(rule.noise, resolution, settings.false_alarm)
    return replace(
        memory,
        raw=raw if arrived else memory.raw,
        repeats=repeats,
        step=step,
        needed=needed,
        beside=then,
        server_ns=reading.server_ns if reading.server_ns is not None else memory.server_ns,
        still=0 if renewed else memory.still + 1,
    )


def _stale(settings: AdmitSettings, before: SignalMemory, tracked: SignalMemory) -> bool:
    went_back = before.server_ns is not None and tracked.server_ns is not None and tracked.server_ns < before.server_ns
    return went_back or tracked.still >= settings.stale_after


def _frozen(plan: AdmitPlan, rule: SignalRule, tracked: SignalMemory, beside: tuple[float | None, ...]) -> bool:
    if tracked.needed is not None:
        return tracked.repeats + 1 >= tracked.needed
    if tracked.repeats + 1 < plan.settings.still_readings:
        return False
    return any(
        was is not None and now is not None and abs(now - was) > plan.rules[position].moved
        for position, was, now in zip(rule.neighbours, tracked.beside, beside, strict=True)
    )


def _conclude(
    rule: SignalRule, settings: AdmitSettings, tracked: SignalMemory, k: int, raw: float | None, quality: Quality
) -> tuple[SignalMemory, Quality]:
    """Check for a jump, then bring the memory up to date."""
    if not quality.usable or raw is None:
        # The repeats before a freeze was proven were believed and should not have been.
        believed = tracked.repeats if quality is Quality.FROZEN else 0
        return replace(
            tracked,
            admitted_k=min(tracked.admitted_k, k - believed),
            unusable=max(tracked.unusable + 1, believed),
        ), quality
    level_for = 0
    if tracked.admitted is not None:
        periods = max(1, k - tracked.admitted_k)
        if abs(raw - tracked.admitted) > rule.jump_per_period * periods + rule.jump_margin:
            stays = tracked.level is not None and abs(raw - tracked.level) <= rule.jump_per_period + rule.jump_margin
            level_for = tracked.level_for + 1 if stays else 1
    if 0 < level_for < settings.readmit_after:
        # A transmitter that reads what cannot be earns no credit for the time: the allowance does not grow meanwhile.
        jumped = replace(tracked, admitted_k=k, level=raw, level_for=level_for, unusable=tracked.unusable + 1)
        return jumped, Quality.JUMPED
    return replace(tracked, admitted=raw, admitted_k=k, level=None, level_for=0, unusable=0), quality
