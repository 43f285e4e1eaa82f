"""What every section's period was worth, before anything is written.

Much of it is certain before the synthesis: whoever is severed, barred or blind misses the period whatever the plan
says. The synthesis is told, so that the neighbours plan around such a section in the same period.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from controllers import Outcome, Plan
from controllers.arrays import Bools
from gateway.design import PlantDesign
from gateway.links.protocol import Gathered
from gateway.panel_view import PanelView
from gateway.plantfile.plant import Role
from gateway.signals import MISSING
from gateway.standing import Standing
from gateway.verdict import Verdict, first_cause


def foresee(
    design: PlantDesign,
    gathered: Gathered,
    view: PanelView,
    charge_expected: Bools,
    blind: frozenset[str],
    not_taken: Bools,
) -> list[Verdict]:
    """Say of every section what is certain before its synthesis; on time where nothing speaks against it.

    Args:
        charge_expected: per section, whether the panel should show it in our charge.
        blind: names of the sections whose estimate is not trusted.
        not_taken: per section, whether the panel did not take its last set.
    """
    verdicts = []
    for i, section in enumerate(design.plant.sections):
        measured = section.signals_of(Role.MEASURED)
        causes = []
        if measured and all(gathered.readings.get(s.tag, MISSING) is MISSING for s in measured):
            causes.append(Verdict.SEVERED)
        if not view.permit or view.clock_ms is None or (charge_expected[i] and not view.in_charge[i]):
            causes.append(Verdict.BARRED)
        if section.name in blind:
            causes.append(Verdict.BLIND)
        if not_taken[i]:
            causes.append(Verdict.UNWRITTEN)
        verdicts.append(first_cause(causes))
    return verdicts


def judge(design: PlantDesign, foreseen: Sequence[Verdict], plan: Plan | None, broken: str) -> list[Verdict]:
    """Judge every section up to and including its synthesis.

    Args:
        foreseen: what was certain before it.
        plan: None when the synthesis was late or broke down.
        broken: why it broke down, empty when it did not.
    """
    tolerance = design.plant.controller.tolerance_spans
    verdicts = []
    for i, verdict in enumerate(foreseen):
        causes = [verdict]
        if broken:
            causes.append(Verdict.UNCONVERGED)
        elif plan is None:
            causes.append(Verdict.LATE)
        elif plan.outcome is Outcome.NOT_FINITE or not plan.residual[i] <= tolerance:
            causes.append(Verdict.UNCONVERGED)
        verdicts.append(first_cause(causes))
    return verdicts


def set_not_taken(design: PlantDesign, standing: Standing, view: PanelView) -> Bools:
    """Sections (N,) whose last set the panel did not take: it does not show the counter that was sent.

    A section whose inputs were refused in so many words is not among them: that was its verdict a period ago.
    """
    sent = standing.sent
    if design.plant.panel is None or sent is None or view.accepted == sent.k:
        return np.zeros(len(standing.holds), dtype=bool)
    return sent.sections & ~sent.refused


def not_told(standing: Standing, view: PanelView) -> Bools:
    """Sections (N,) whose last inputs have certainly not reached their actuators, whoever refused them."""
    sent = standing.sent
    if sent is None:
        return np.zeros(len(standing.holds), dtype=bool)
    return sent.sections if view.accepted not in (None, sent.k) else sent.refused
