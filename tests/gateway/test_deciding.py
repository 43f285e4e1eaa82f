"""Tests of `gateway.deciding`: the last look before the wire, and the account that stands."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest

from gateway.deciding import Accounting, Decision, decide, worsened
from gateway.hold import Ask, State
from gateway.inputs import LEFT_ALONE
from gateway.saturate import Guard
from gateway.verdict import Verdict
from tests.gateway.virtual import Rig

ON_TIME = [Verdict.ON_TIME] * 8


@pytest.fixture
async def driving(rig: Rig) -> Rig:
    """A run that drives every section."""
    await rig.run(3)
    return rig


def accounting(rig: Rig, asks: Mapping[int, list[Ask]] | None = None) -> Accounting:
    """The account of the next period."""
    return Accounting(rig.design, rig.k, rig.standing.holds, asks or {})


def decision(rig: Rig, wanted: float, *, last: float = 48.0, asks: Mapping[int, list[Ask]] | None = None) -> Decision:
    """Decide on tank 4's wanted input, the others resting where they were."""
    guard = Guard(rig.design.inputs, rig.names, rig.design.plant.period_s)
    lasts = np.where(np.arange(8) == 3, last, 48.0)
    values = np.where(np.arange(8) == 3, wanted, 48.0)
    view = rig.history[-1].view
    return decide(accounting(rig, asks), guard, ON_TIME, values, lasts, view, rig.standing)


def test_good_inputs_go_out(driving: Rig) -> None:
    """As the synthesis wants them."""
    decided = decision(driving, 50.0)
    assert decided.verdicts == tuple(ON_TIME)
    assert decided.parts[3].values == {"tank-4.pump": 50.0}


@pytest.mark.parametrize("wanted", [float("nan"), float("inf"), 100.1, 58.1])
def test_what_fails_the_last_look_freezes_its_section(driving: Rig, wanted: float) -> None:
    """Not finite, outside its limits, too fast: refused, and the last inputs go out instead."""
    decided = decision(driving, wanted)
    assert decided.verdicts == tuple(Verdict.REFUSED if i == 3 else Verdict.ON_TIME for i in range(8))
    assert decided.holds[3].state is State.FROZEN
    assert decided.parts[3].values == {"tank-4.pump": 48.0}
    assert decided.holds[2].state is State.DRIVING


def test_what_a_hold_would_write_is_looked_at_too(driving: Rig) -> None:
    """A pump found above its hard limit cannot even be told to stay: nothing goes out, and that is a miss."""
    decided = decision(driving, 100.0, last=120.0)
    assert decided.verdicts[3] is Verdict.REFUSED
    assert decided.parts[3] == LEFT_ALONE
    assert decided.parts[2].values == {"tank-3.pump": 48.0}


def test_an_ask_is_accounted_for_once_however_often_the_account_is_made(driving: Rig) -> None:
    """The refused input makes a second account of the same period: one transition, one refusal."""
    decided = decision(driving, float("nan"), asks={3: [Ask.HOLD], 2: [Ask.REARM]})
    assert decided.transitions[3].before is State.DRIVING
    assert decided.transitions[3].after is State.HOLDING
    assert len(decided.refusals[2]) == 1
    assert decided.holds[3].k == driving.k
    assert decided.holds[3].misses == (driving.k,)


def test_an_account_starts_where_the_period_started(driving: Rig) -> None:
    """The second account knows nothing of the first."""
    account = accounting(driving)
    assert account.account(ON_TIME).holds == account.account(ON_TIME).holds
    account.account([Verdict.LATE] * 8)
    assert {hold.state for hold in account.account(ON_TIME).holds} == {State.DRIVING}


def test_a_verdict_only_worsens_where_it_must(driving: Rig) -> None:
    """And keeps its earlier cause."""
    where = np.array([True, True, False])
    given = [Verdict.ON_TIME, Verdict.BLIND, Verdict.ON_TIME]
    assert worsened(given, where, Verdict.REFUSED) == [Verdict.REFUSED, Verdict.BLIND, Verdict.ON_TIME]
