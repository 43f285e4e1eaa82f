"""What every section's period was worth, before anything is written."""

from __future__ import annotations

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


def judge(
    design: PlantDesign,
    gathered: Gathered,
    view: PanelView,
    charge_expected: Bools,
    blind: frozenset[str],
    plan: Plan | None,
    broken: str,
    not_taken: Bools,
) -> list[Verdict]:
    """Judge every section up to and including its synthesis.

    Args:
        charge_expected: per section, whether the panel should show it in our charge.
        blind: names of the sections whose estimate is not trusted.
        plan: None when the synthesis was late or broke down.
        broken: why it broke down, empty when it did not.
        not_taken: per section, whether the panel did not take its last set.
    """
    tolerance = design.plant.controller.tolerance_spans
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
        if broken:
            causes.append(Verdict.UNCONVERGED)
        elif plan is None:
            causes.append(Verdict.LATE)
        elif plan.outcome is Outcome.NOT_FINITE or not plan.residual[i] <= tolerance:
            causes.append(Verdict.UNCONVERGED)
        if not_taken[i]:
            causes.append(Verdict.UNWRITTEN)
        verdicts.append(first_cause(causes))
    return verdicts


def set_not_taken(standing: Standing, view: PanelView) -> Bools:
    """Sections (N,) whose last set the panel did not take: it shows another counter than the one that was sent."""
    if standing.sent is None or view.accepted is None or view.accepted == standing.sent.k:
        return np.zeros(len(standing.holds), dtype=bool)
    return standing.sent.sections
