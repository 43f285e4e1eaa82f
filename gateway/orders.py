"""What people asked, applied at the start of a period and answered at its end.

A request is applied whole or refused whole where that is possible: targets and authority are checked before they
change anything. Holds and rearms go to the hold table, section by section; the answer names the sections that refused.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

from gateway.authority import Authority, Changed, Denied, change
from gateway.design import PlantDesign
from gateway.hold import Ask
from gateway.period import Happened
from gateway.plantfile.plant import Plant, SiteKind
from gateway.requests import Asked, Hold, Rearm, Rehearse, RequestState, SetAuthority, SetTarget
from gateway.standing import Standing


@dataclass(frozen=True)
class Answer:
    """What becomes of one request."""

    asked: Asked
    state: RequestState
    reason: str = ""


@dataclass(frozen=True)
class Orders:
    """One period's requests.

    Attributes:
        standing: with targets and authority as asked.
        asks: per section, what the hold table is asked, in order.
        answers: given already.
        pending: requests whose answer the hold table gives, with their sections.
        slow_periods: rehearsal: so many syntheses are to be late.
        changed: change of authority and who asked for it; None without one.
    """

    standing: Standing
    asks: Mapping[int, Sequence[Ask]] = field(default_factory=dict)
    answers: tuple[Answer, ...] = ()
    pending: tuple[tuple[Asked, tuple[int, ...], Ask], ...] = ()
    slow_periods: int = 0
    changed: tuple[Changed, str] | None = None


def change_authority(
    design: PlantDesign, site: SiteKind, standing: Standing, to: Authority, *, override: bool = False
) -> Changed | Denied:
    """Decide a change of authority by what the inputs are told now."""
    found = {signal.tag: float(value) for signal, value in zip(design.inputs, standing.last, strict=True)}
    return change(standing.authority, to, design.inputs, found, site, soaked=False, override=override)


def apply_requests(design: PlantDesign, site: SiteKind, standing: Standing, asked: Sequence[Asked]) -> Orders:
    """Apply what was asked since the last period, in order."""
    plant = design.plant
    index = {section.name: i for i, section in enumerate(plant.sections)}
    asks: dict[int, list[Ask]] = {}
    answers: list[Answer] = []
    pending: list[tuple[Asked, tuple[int, ...], Ask]] = []
    slow = 0
    changed: tuple[Changed, str] | None = None
    for one in asked:
        match one.request:
            case Hold(sections) | Rearm(sections):
                ask = Ask.HOLD if isinstance(one.request, Hold) else Ask.REARM
                places = tuple(index[name] for name in sections)
                for i in places:
                    _append(asks.setdefault(i, []), ask)
                pending.append((one, places, ask))
            case SetTarget(tag, value):
                standing = replace(standing, targets={**standing.targets, tag: value})
                answers.append(Answer(one, RequestState.APPLIED))
            case SetAuthority(wanted):
                decided = change_authority(design, site, standing, Authority(wanted))
                if isinstance(decided, Denied):
                    answers.append(Answer(one, RequestState.REFUSED, decided.sentence))
                    continue
                standing = replace(standing, authority=decided.state)
                changed = (decided, one.who)
                if decided.ask is not None:
                    for i in range(len(plant.sections)):
                        _append(asks.setdefault(i, []), decided.ask)
                answers.append(Answer(one, RequestState.APPLIED))
            case Rehearse(periods):
                if site is not SiteKind.BENCH:
                    answers.append(Answer(one, RequestState.REFUSED, "rehearsals are for bench sites only"))
                    continue
                slow = periods
                answers.append(Answer(one, RequestState.APPLIED))
    return Orders(standing, asks, tuple(answers), tuple(pending), slow, changed)


def _append(asks: list[Ask], ask: Ask) -> None:
    """Two people who ask the same in one period share one ask, so that neither is refused for the other's sake."""
    if not asks or asks[-1] is not ask:
        asks.append(ask)


def settle(plant: Plant, orders: Orders, happened: Happened) -> tuple[Answer, ...]:
    """All answers of a period, those of the hold table included."""
    names = [section.name for section in plant.sections]
    settled = []
    for asked, places, ask in orders.pending:
        refused = {
            names[i]: refusal.sentence for i in places for refusal in happened.refusals.get(i, ()) if refusal.ask is ask
        }
        state = RequestState.REFUSED if len(refused) == len(places) else RequestState.APPLIED
        settled.append(Answer(asked, state, "; ".join(f"{name}: {reason}" for name, reason in refused.items())))
    return (*orders.answers, *settled)
