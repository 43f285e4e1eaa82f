"""What a period leaves behind, made into one journal record and into the sentences a person reads.

The record has everything, every period. Sentences come only when something changed: a section's state, a signal's
quality, the panel, an unanswered write.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import nan

import numpy as np

from gateway import sentences
from gateway.design import PlantDesign
from gateway.hold import Transition
from gateway.journal import Layout, PeriodRecord, SectionRow, SignalRow, Timing
from gateway.panel_view import PanelView
from gateway.period import Happened
from gateway.sentences import Notice
from gateway.signals import MISSING, Quality
from gateway.standing import Standing
from gateway.tags import PANEL_READ, panel_tag

PANEL_RECORDED = tuple(PANEL_READ)


def layout_of(design: PlantDesign) -> Layout:
    """Names of everything a period record of this plant holds."""
    names = {}
    for name, physics in design.physics.sections:
        names[name] = (*physics.state_names, *(f"{one} disturbance" for one in physics.disturbance_names))
    panel = PANEL_RECORDED if design.plant.panel is not None else ()
    return Layout.of(design.plant, estimated=names, panel=panel)


def record_of(
    design: PlantDesign, layout: Layout, after: Standing, happened: Happened, due_wall_ns: int
) -> PeriodRecord:
    """One journal record of one period."""
    judged = happened.admission.by_tag()
    readings = happened.gathered.readings
    places = {signal.tag: k for k, signal in enumerate(design.inputs)}
    estimates = _estimates(design, after)

    def row(tag: str) -> SignalRow:
        quality = judged[tag].quality if tag in judged else Quality.GOOD
        return SignalRow.of(readings.get(tag, MISSING), quality)

    sections = []
    for i, names in enumerate(layout.sections):
        driven = [places[f"{names.section}.{name}"] for name in names.driven]
        sections.append(
            SectionRow(
                state=after.holds[i].state,
                verdict=happened.verdicts[i],
                measured=tuple(row(f"{names.section}.{name}") for name in names.measured),
                estimates=estimates[i],
                wanted=tuple(float(happened.wanted[k]) for k in driven),
                written=tuple(float(happened.written[k]) for k in driven),
            )
        )
    timing = happened.timing
    plan = happened.plan
    return PeriodRecord(
        k=happened.k,
        due_ns=due_wall_ns,
        timing=Timing(
            start_us=timing.start_us,
            gather_us=timing.gather_us,
            estimate_us=timing.estimate_us,
            synthesise_us=timing.synthesise_us,
            write_us=timing.write_us,
            total_us=timing.total_us,
        ),
        iterations=None if plan is None else plan.iterations,
        worst_residual_spans=None if plan is None else float(plan.residual.max()),
        slack_us=timing.slack_us,
        sections=tuple(sections),
        panel=tuple(row(panel_tag(name)) for name in layout.panel),
    )


def _estimates(design: PlantDesign, after: Standing) -> list[tuple[float, ...]]:
    """States, then disturbances, SI, per section; NaN before the first estimate."""
    net, scaling = design.network, design.scaling
    if after.estimate is None:
        x, w = np.full(net.a.shape[0], nan), np.full(net.e.shape[1], nan)
    else:
        x = after.estimate.x * scaling.x_unit + scaling.x_zero
        w = (after.estimate.w + after.known) * scaling.w_unit + scaling.w_zero
    return [
        (*map(float, x[net.x_at[i] : net.x_at[i + 1]]), *map(float, w[net.w_at[i] : net.w_at[i + 1]]))
        for i in range(net.size)
    ]


@dataclass(frozen=True)
class Told:
    """What was last said, so that only changes are."""

    qualities: dict[str, Quality]
    view: PanelView | None


def notices_of(design: PlantDesign, told: Told, happened: Happened) -> tuple[list[Notice], Told]:
    """Sentences of one period besides its transitions, and what is known to have been said after them."""
    qualities = {one.tag: one.quality for one in happened.admission.signals}
    out = list(_panel_notices(told.view, happened.view, severed=not happened.gathered.readings))
    if happened.broken:
        out.append(sentences.synthesis_broken(happened.broken))
    if happened.refused_set is not None:
        out.append(sentences.set_refused(*happened.refused_set))
    if happened.unknown:
        out.append(sentences.write_unknown(happened.unknown, happened.k, "no answer before the cut-off"))
    if all(quality is Quality.MISSING for quality in qualities.values()):
        return out, told  # The whole link is gone: told once, by the link. What is back as it was needs no sentence.
    out += _quality_notices(design, told.qualities, qualities, happened)
    return out, Told(qualities, happened.view if happened.gathered.complete else told.view)


def transition_events(design: PlantDesign, happened: Happened) -> list[Notice]:
    """One notice per section that changed its state, for the journal."""
    names = [section.name for section in design.plant.sections]
    return [
        sentences.transition(names[i], change, design.plant.hold, happened.timing.slack_us)
        for i, change in happened.transitions.items()
    ]


def transition_lines(design: PlantDesign, happened: Happened) -> list[Notice]:
    """One notice per way in which sections changed their states, for the log: one cause, one line."""
    names = [section.name for section in design.plant.sections]
    ways: dict[Transition, list[str]] = {}
    for i, change in happened.transitions.items():
        ways.setdefault(change, []).append(names[i])
    settings, slack_us = design.plant.hold, happened.timing.slack_us
    return [
        sentences.transition(alike[0], change, settings, slack_us)
        if len(alike) == 1
        else sentences.transitions(alike, change, settings, slack_us)
        for change, alike in ways.items()
    ]


def _panel_notices(before: PanelView | None, now: PanelView, *, severed: bool) -> Iterator[Notice]:
    if severed or now.clock_ms is None:
        return
    if before is None or before.permit != now.permit:
        yield sentences.permit(on=now.permit)
    if (before is not None and before.tripped) != now.tripped:
        yield sentences.panel(tripped=now.tripped)


def _quality_notices(
    design: PlantDesign, before: dict[str, Quality], now: dict[str, Quality], happened: Happened
) -> Sequence[Notice]:
    """One per signal whose quality changed."""
    tags = {signal.tag: signal for section in design.plant.sections for signal in section.signals}
    return [
        sentences.quality(
            tags[tag].section, tags[tag].name, before[tag], quality, happened.gathered.readings[tag].value
        )
        for tag, quality in now.items()
        if tag in before and before[tag] is not quality and tag in happened.gathered.readings
    ]
