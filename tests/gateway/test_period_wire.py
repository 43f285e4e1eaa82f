"""The invariant behind every fault, under schedules nobody thought of: what may be on the wire, and what never is.

`audit` judges each request by the plant file and by what the panel told the actuators just before, never by what the
gateway believes. Every schedule ends with the faults gone, and must then lead back to driving.
"""

from __future__ import annotations

import asyncio
from math import isfinite

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from gateway.design import PlantDesign
from gateway.hold import State
from gateway.plantfile.plant import Signal
from gateway.signals import Reading
from gateway.verdict import Verdict
from tests.gateway.virtual import Rig, Sent

ACTS = (
    "bias tank-4.level 6",
    "bias tank-2.level -1",
    "freeze tank-3.level",
    "dropout tank-5.level for 1 s",
    "dropout tank-5.consumer",
    "nan tank-1.level for 2 s",
    "stuck tank-6.pump",
    "set tank-3.consumer 20",
    "set tank-6.consumer 0",
    "permit off for 1 s",
    "permit off",
    "permit on",
    "clear all",
    "wire cut",
    "wire deaf",
    "wire good",
    "wire hides tank-4.pump",
    "wire shows nonsense",
    "wire refuses tank-2.pump",
    "wire refuses panel.period",
    "wire refuses tank-7.in_charge",
    "skip 1",
    "skip 3",
    "ask hold tank-2",
    "ask hold all",
    "ask rearm all",
    "ask authority observe",
    "ask authority limited",
    "ask authority full",
    "ask target tank-4.level 36",
    "ask target tank-4.level 6",
    "ask target tank-1.level 20.5",
    "ask rehearse slow 1",
    "ask rehearse slow 3",
)
SCHEDULES = st.lists(st.tuples(st.sampled_from(ACTS), st.integers(1, 3)), max_size=12)


def act(rig: Rig, line: str) -> None:
    """Do one of `ACTS`."""
    word, _, rest = line.partition(" ")
    match word:
        case "ask":
            rig.ask(rest)
        case "skip":
            rig.skip(int(rest))
        case "wire":
            spoil(rig, rest)
        case _:
            rig.plant.provoke(line)


def spoil(rig: Rig, how: str) -> None:
    """Spoil the wire, or mend it."""
    link = rig.link
    word, _, tag = how.partition(" ")
    match word:
        case "cut":
            link.direct.cut = True
        case "deaf":
            link.direct.drop_answers = True
        case "hides":
            link.shows[tag] = None
        case "refuses":
            link.refuses.add(tag)
        case "shows":
            link.shows |= {"tank-3.level": Reading("abc"), "tank-8.level": Reading(True), "panel.refusal": Reading(7)}
        case _:
            link.direct.cut = link.direct.drop_answers = False
            link.shows.clear()
            link.refuses.clear()


def audit(rig: Rig, sent: Sent) -> None:
    """Judge one request."""
    happened, signals = rig.history[-1], {signal.tag: signal for signal in rig.design.inputs}
    bands = rig.standing.authority.bands()
    for tag, value in sent.inputs.items():
        signal = signals[tag]
        slack = 1e-6 * signal.width
        assert isfinite(value)
        assert signal.hard[0] <= value <= signal.hard[1], f"{tag} = {value}"
        most = signal.rate_per_s * rig.design.plant.period_s
        assert abs(value - sent.told[tag]) <= most + slack, f"{tag} from {sent.told[tag]} to {value}"
        low, high = bands.get(tag, signal.hard)
        assert low <= value <= high, f"{tag} = {value}, band {low} to {high}"
        assert happened.view.permit
        allowed(rig, signal, value, sent)
    for section, bit in sent.bits.items():
        lost = rig.verdict(section) is Verdict.UNWRITTEN
        right = (State.DRIVING, State.FROZEN) if bit else (State.HOLDING, State.WATCHING)
        assert rig.state(section) in right or lost
        assert happened.view.in_charge[rig.place(section)] is not bit
    commit = ["panel.expires", "panel.period"] if sent.inputs else []
    heartbeat = [name for name in sent.names if name == "panel.heartbeat"]
    order = [*(f"{section}.in_charge" for section in sent.bits), *sent.inputs, *commit, *heartbeat]
    assert sent.names == order


def allowed(rig: Rig, signal: Signal, value: float, sent: Sent) -> None:
    """The state of a section says which of three values may go out; after a lost write it was one of them."""
    happened, told = rig.history[-1], sent.told[signal.tag]
    k = [one.tag for one in rig.design.inputs].index(signal.tag)
    low, high = rig.standing.authority.bands().get(signal.tag, signal.hard)
    safe = min(max(30.0, low), high)
    by_state = {
        State.DRIVING: float(happened.wanted[k]),
        State.FROZEN: told,
        State.HOLDING: told + min(max(safe - told, -5.0), 5.0),
    }
    assert happened.plan is not None or rig.state(signal.section) is not State.DRIVING
    assert rig.state(signal.section) in by_state, f"{signal.section} is {rig.state(signal.section)} and writes {value}"
    lost = rig.verdict(signal.section) is Verdict.UNWRITTEN
    candidates = by_state.values() if lost else [by_state[rig.state(signal.section)]]
    assert any(abs(value - one) <= 1e-6 * signal.width for one in candidates), f"{signal.tag} = {value}: {by_state}"


async def play(rig: Rig, schedule: list[tuple[str, int]]) -> None:
    """Run a schedule, auditing every period."""
    await watched(rig, 2)
    for line, periods in schedule:
        act(rig, line)
        await watched(rig, periods)
    for line in ("clear all", "permit on", "wire good"):
        act(rig, line)
    await watched(rig, 1)  # Authority is given over inputs that can be read.
    rig.ask("authority full")
    await watched(rig, 11)
    rig.ask("rearm all")
    await watched(rig, 3)
    assert rig.states() == {State.DRIVING}
    assert all(rig.in_charge(name) for name in rig.names)


async def watched(rig: Rig, periods: int) -> None:
    """Run periods and judge what each sent."""
    for _ in range(periods):
        before = len(rig.link.sent)
        await rig.run()
        assert len(rig.link.sent) - before <= 1
        for sent in rig.link.sent[before:]:
            audit(rig, sent)


@settings(max_examples=8, deadline=None, suppress_health_check=[HealthCheck.too_slow], derandomize=True)
@given(schedule=SCHEDULES)
@example(
    schedule=[
        ("ask target tank-4.level 36", 2),
        ("wire deaf", 1),
        ("wire hides tank-4.pump", 0),
        ("ask target tank-4.level 6", 3),
    ]
)
@example(schedule=[("wire hides tank-4.pump", 1), ("permit off for 1 s", 3)])
@example(schedule=[("wire hides tank-4.pump", 0), ("ask authority observe", 1), ("ask authority full", 3)])
@example(schedule=[("ask authority limited", 3), ("permit off", 4), ("permit on", 4), ("ask authority full", 2)])
def test_nothing_but_what_the_table_allows_is_ever_on_the_wire(
    tarn_row: PlantDesign, schedule: list[tuple[str, int]]
) -> None:
    """Finite, inside hard limits, rate and band, and by the state of its section; and every schedule can be ended."""
    asyncio.run(play(Rig(tarn_row), schedule))


@pytest.mark.parametrize("line", ACTS)
def test_each_act_alone_keeps_to_the_table(tarn_row: PlantDesign, line: str) -> None:
    """While a target change is under way, so that inputs move."""
    rig = Rig(tarn_row)
    rig.ask("target tank-4.level 26")
    asyncio.run(play(rig, [(line, 4)]))
