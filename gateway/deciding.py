"""Judge and saturate: from a period's plan to verdicts, hold states, and what each section is told.

A verdict may change twice after the first judgement, by the last look before the wire and by the write itself. Each
time the hold table accounts for the period again from where the period started; only the last account is kept.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from controllers.arrays import Bools, Floats
from gateway.design import PlantDesign
from gateway.hold import Ask, Refusal, SectionHold, Transition, advance, writes
from gateway.inputs import LEFT_ALONE, Outgoing, outgoing_of
from gateway.judging import not_told
from gateway.panel_view import PanelView
from gateway.saturate import Guard
from gateway.standing import Standing
from gateway.verdict import Verdict, first_cause


@dataclass(frozen=True)
class Accounting:
    """The hold table's side of one period: where its sections started, and what was asked of each."""

    design: PlantDesign
    k: int
    before: tuple[SectionHold, ...]
    asks: Mapping[int, Sequence[Ask]]

    def account(self, verdicts: Sequence[Verdict]) -> Decision:
        """Account for the period with these verdicts, from its start."""
        settings = self.design.plant.hold
        steps = [
            advance(hold, settings, self.k, verdict, self.asks.get(i, ()))
            for i, (hold, verdict) in enumerate(zip(self.before, verdicts, strict=True))
        ]
        return Decision(
            verdicts=tuple(verdicts),
            holds=tuple(hold for hold, _, _ in steps),
            transitions={i: moved for i, (_, moved, _) in enumerate(steps) if moved is not None},
            refusals={i: refused for i, (_, _, refused) in enumerate(steps) if refused},
        )


@dataclass(frozen=True)
class Decision:
    """Where a period leaves every section.

    Attributes:
        verdicts: what it was worth.
        holds: the hold table's state after it.
        transitions: by section, where the state changed.
        refusals: by section, asks that changed nothing.
        parts: what each section is told; empty before saturation.
    """

    verdicts: tuple[Verdict, ...]
    holds: tuple[SectionHold, ...]
    transitions: Mapping[int, Transition]
    refusals: Mapping[int, tuple[Refusal, ...]]
    parts: tuple[Outgoing, ...] = ()


def decide(
    accounting: Accounting,
    guard: Guard,
    judged: Sequence[Verdict],
    wanted: Floats,
    last: Floats,
    view: PanelView,
    standing: Standing,
) -> Decision:
    """Let the guard look at the synthesis' inputs, then at whatever the hold states make of them.

    Args:
        judged: verdicts up to the synthesis.
        wanted: its inputs (m,), engineering units, NaN where there are none.
        last: what each input was told last (m,).
        view: the panel, this period.
        standing: before this period.
    """
    design, bands = accounting.design, standing.authority.bands()
    unheard = not_told(standing, view)
    checked = guard.check(wanted, last, bands)
    decision = accounting.account(worsened(judged, checked.refused, Verdict.REFUSED))
    parts = tuple(
        outgoing_of(
            design,
            i,
            writes(hold.state),
            checked.values,
            last,
            view,
            bands,
            clean=not verdict.is_miss,
            ours=bool(standing.charge_expected[i]),
            not_told=bool(unheard[i]),
        )
        for i, (hold, verdict) in enumerate(zip(decision.holds, decision.verdicts, strict=True))
    )
    stopped = _stopped(design, guard, parts, last, bands)
    if stopped.any():
        # What a hold would write is looked at like everything else; what fails stays off the wire.
        decision = accounting.account(worsened(decision.verdicts, stopped, Verdict.REFUSED))
        parts = tuple(LEFT_ALONE if bad else part for part, bad in zip(parts, stopped, strict=True))
    return replace(decision, parts=parts)


def worsened(verdicts: Sequence[Verdict], where: Bools, by: Verdict) -> list[Verdict]:
    """Verdicts with one more cause in some sections."""
    return [first_cause((verdict, by)) if bad else verdict for verdict, bad in zip(verdicts, where, strict=True)]


def _stopped(
    design: PlantDesign,
    guard: Guard,
    parts: Sequence[Outgoing],
    last: Floats,
    bands: Mapping[str, tuple[float, float]],
) -> Bools:
    """Sections whose outgoing values, whoever made them, fail the last look before the wire."""
    going = {tag: value for part in parts for tag, value in part.values.items()}
    values = np.array([going.get(signal.tag, np.nan) for signal in design.inputs])
    stopped: Bools = guard.check(values, last, bands).refused & np.array([bool(part.values) for part in parts])
    return stopped
