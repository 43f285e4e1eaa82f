"""What breaks between control and the panel, in virtual time: links, answers, permit, refusals, trips and restarts."""

from __future__ import annotations

import numpy as np
import pytest

from gateway.authority import Authority
from gateway.clock import NS
from gateway.design import PlantDesign
from gateway.hold import Start, State
from gateway.requests import RequestState
from gateway.signals import Quality, Reading
from gateway.verdict import Verdict
from tests.gateway.virtual import Rig

MOST_PERCENT = 10.0 + 1e-9
"""Largest move of a pump in one period: 20 %/s for 500 ms."""


@pytest.fixture
async def driving(rig: Rig) -> Rig:
    """A run that drives every section."""
    await rig.run(5)
    return rig


def told(rig: Rig) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
    """What the panel tells every pump now."""
    return np.array([rig.told(name) for name in rig.names])


def tripped(rig: Rig) -> bool:
    """Whether the panel's watchdog ran out."""
    return rig.plant.read_all()["panel.tripped"].value is True


# The link -------------------------------------------------------------------------------------------------------------


async def test_a_cut_link_severs_everybody_in_the_same_period(driving: Rig) -> None:
    """No reading arrives, nothing is sent, and nothing is invented instead."""
    driving.link.direct.cut = True
    before = told(driving)
    await driving.run()
    assert driving.states() == {State.FROZEN}
    assert driving.verdicts() == {Verdict.SEVERED}
    assert driving.quality("tank-4.level") is Quality.MISSING
    assert driving.link.sent[-1].inputs == {}
    assert (told(driving) == before).all()


async def test_a_link_that_comes_back_in_time_drives_again(driving: Rig) -> None:
    """One clean period, and no pump jumps."""
    before = told(driving)
    driving.link.direct.cut = True
    await driving.run(2)
    driving.link.direct.cut = False
    await driving.run()
    assert driving.states() == {State.DRIVING}
    assert np.abs(told(driving) - before).max() <= MOST_PERCENT


async def test_a_link_cut_for_long_ends_with_the_panel_driving_and_everybody_on_hold(driving: Rig) -> None:
    """The watchdog runs out, the local action runs; the link's return alone takes nothing back."""
    driving.link.direct.cut = True
    await driving.run(8)
    assert tripped(driving)
    driving.link.direct.cut = False
    await driving.run(10)
    assert driving.states() == {State.HOLDING}
    assert not any(driving.in_charge(name) for name in driving.names)
    assert told(driving) == pytest.approx(np.full(8, 30.0))
    driving.ask("rearm all")
    await driving.run(2)
    assert driving.states() == {State.DRIVING}
    assert np.abs(told(driving) - 30.0).max() <= MOST_PERCENT


async def test_a_link_cut_between_reading_and_writing_is_one_miss(driving: Rig) -> None:
    """Nothing left this process, for certain: unwritten now, and no second miss when the counter is read back."""
    read = driving.link.direct.gather

    async def gather_then_cut(due_ns: int) -> object:
        gathered = await read(due_ns)
        driving.link.direct.cut = True
        return gathered

    driving.link.direct.gather = gather_then_cut  # type: ignore[method-assign, assignment]
    await driving.run()
    assert driving.verdicts() == {Verdict.UNWRITTEN}
    driving.link.direct.gather, driving.link.direct.cut = read, False  # type: ignore[method-assign]
    await driving.run()
    assert driving.states() == {State.DRIVING}
    assert driving.history[-1].refused_set is None


async def test_an_unknown_write_freezes_and_is_read_back_before_anything_is_trusted(driving: Rig) -> None:
    """The panel took it, the answer got lost: unwritten at once; a period later its counter says all is well."""
    driving.link.direct.drop_answers = True
    driving.ask("target tank-4.level 24")
    (happened,) = await driving.run()
    assert driving.states() == {State.FROZEN}
    assert driving.verdicts() == {Verdict.UNWRITTEN}
    assert set(happened.unknown) == set(driving.link.sent[-1].names)
    assert np.isnan(happened.written).all()
    driving.link.direct.drop_answers = False
    moved = told(driving)
    await driving.run()
    assert driving.states() == {State.DRIVING}
    assert np.abs(told(driving) - moved).max() <= MOST_PERCENT


async def test_an_unknown_write_that_was_refused_is_unwritten_when_read_back(driving: Rig) -> None:
    """Neither the answer nor the set arrived: the panel still shows the old counter, which is the second miss."""
    driving.link.direct.drop_answers = True
    driving.link.refuses = {"panel.period"}
    await driving.run()
    assert driving.verdicts() == {Verdict.UNWRITTEN}
    driving.link.direct.drop_answers, driving.link.refuses = False, set()
    (happened,) = await driving.run()
    assert driving.verdicts() == {Verdict.UNWRITTEN}
    assert happened.refused_set == (driving.k - 2, "it shows another counter")
    await driving.run()
    assert driving.states() == {State.DRIVING}


async def test_an_input_that_cannot_be_read_back_after_an_unknown_write_stops_its_section(driving: Rig) -> None:
    """Where tank 4's pump is nobody knows, so no move of it can be called small enough; it waits for its reading."""
    driving.link.direct.drop_answers = True
    await driving.run()
    driving.link.direct.drop_answers = False
    driving.link.shows["tank-4.pump"] = None
    await driving.run()
    assert driving.verdict("tank-4") is Verdict.BLIND
    assert driving.state("tank-3") is State.DRIVING
    assert "tank-4.pump" not in driving.link.sent[-1].inputs
    driving.link.shows.clear()
    await driving.run()
    assert driving.states() == {State.DRIVING}


async def test_answers_that_never_come_latch_a_hold_whose_ramp_goes_on(driving: Rig, tarn_row: PlantDesign) -> None:
    """Each set arrives and is read back; nobody vouches for it, so it is a miss; the safe hold still gets there."""
    driving.link.direct.drop_answers = True
    await driving.run(tarn_row.plant.hold.latch_after)
    assert driving.states() == {State.HOLDING}
    await driving.run(6)
    assert told(driving) == pytest.approx(np.full(8, 30.0))


# The panel says no ----------------------------------------------------------------------------------------------------


async def test_permit_off_bars_everybody_at_once_and_nothing_is_sent(driving: Rig) -> None:
    """The panel has taken the sections back; only the heartbeat goes out."""
    driving.plant.provoke("permit off")
    await driving.run()
    assert driving.states() == {State.FROZEN}
    assert driving.verdicts() == {Verdict.BARRED}
    assert driving.link.sent[-1].names == ["panel.heartbeat"]


async def test_a_short_withdrawal_of_the_permit_is_forgiven(driving: Rig) -> None:
    """One clean period takes the sections again, from where the local action left the pumps."""
    driving.plant.provoke("permit off for 0.9 s")
    await driving.run(2)
    left = told(driving)
    await driving.run()
    assert driving.states() == {State.DRIVING}
    assert all(driving.in_charge(name) for name in driving.names)
    assert np.abs(told(driving) - left).max() <= MOST_PERCENT + 5.0 * 0.5


async def test_a_long_withdrawal_of_the_permit_waits_for_a_person(driving: Rig) -> None:
    """The hold latches; the permit's return alone takes nothing."""
    driving.plant.provoke("permit off")
    await driving.run(8)
    driving.plant.provoke("permit on")
    await driving.run(10)
    assert driving.states() == {State.HOLDING}
    assert not any(driving.in_charge(name) for name in driving.names)


async def test_a_section_the_panel_takes_away_is_barred_and_not_snatched_back_in_that_period(driving: Rig) -> None:
    """The site took one section; control notes a miss, and asks for it again only in a clean period."""
    driving.plant.write([("tank-4.in_charge", False)])
    await driving.run()
    assert driving.verdict("tank-4") is Verdict.BARRED
    assert driving.state("tank-4") is State.FROZEN
    assert driving.link.sent[-1].bits == {}
    assert "tank-4.pump" not in driving.link.sent[-1].inputs
    assert driving.state("tank-3") is State.DRIVING
    await driving.run()
    assert driving.link.sent[-1].bits == {"tank-4": True}
    assert driving.state("tank-4") is State.DRIVING


async def test_one_rejected_input_is_unwritten_for_its_section_alone(driving: Rig) -> None:
    """A bad write status counts against that section, once; the others' inputs are in force."""
    driving.link.refuses = {"tank-4.pump"}
    (happened,) = await driving.run()
    assert driving.verdict("tank-4") is Verdict.UNWRITTEN
    assert driving.state("tank-4") is State.FROZEN
    assert np.isnan(happened.written[3])
    assert driving.state("tank-3") is State.DRIVING
    driving.link.refuses = set()
    await driving.run()
    assert driving.states() == {State.DRIVING}


async def test_a_set_refused_as_a_whole_is_one_miss_for_everybody(driving: Rig) -> None:
    """Refused in so many words; told with the panel's own words a period later, when they can be read."""
    clock_ms = driving.plant.read_all()["panel.clock"].value
    assert isinstance(clock_ms, int)
    driving.link.shows["panel.clock"] = Reading(clock_ms - 1000)
    await driving.run()
    assert driving.verdicts() == {Verdict.UNWRITTEN}
    driving.link.shows.clear()
    (happened,) = await driving.run()
    assert happened.refused_set is not None
    assert "expired" in happened.refused_set[1]
    assert driving.states() == {State.DRIVING}


@pytest.mark.parametrize("value", [None, "7", 7.5, -1])
async def test_a_panel_clock_nobody_can_read_bars_everybody(driving: Rig, value: object) -> None:
    """No set can be given an expiry, so none is sent."""
    driving.link.shows["panel.clock"] = Reading(value)
    await driving.run()
    assert driving.verdicts() == {Verdict.BARRED}
    assert driving.link.sent[-1].inputs == {}


async def test_a_counter_nobody_can_read_confirms_nothing(driving: Rig) -> None:
    """What cannot be read counts as the careful answer: the last set is not known to be in force."""
    driving.link.shows["panel.accepted"] = Reading("many")
    await driving.run()
    assert driving.verdicts() == {Verdict.UNWRITTEN}
    assert driving.states() == {State.FROZEN}


async def test_a_hold_the_panel_does_not_listen_to_is_handed_back(driving: Rig, tarn_row: PlantDesign) -> None:
    """An input that is refused for good cannot be ramped: the panel's local action does it."""
    driving.link.refuses = {"tank-4.pump"}
    await driving.run(tarn_row.plant.hold.latch_after + 1)
    assert driving.state("tank-4") is State.HOLDING
    assert driving.link.sent[-1].bits == {"tank-4": False}
    await driving.run(10)
    assert not driving.in_charge("tank-4")
    assert driving.told("tank-4") == pytest.approx(30.0)
    assert all(driving.state(name) is State.DRIVING for name in driving.names if name != "tank-4")


async def test_counters_from_before_a_clock_was_set_back_end_with_the_panel_driving(driving: Rig) -> None:
    """Wall clock an hour back, restart: the panel refuses every set as old. Nobody is left holding by our heartbeat."""
    driving.ask("authority observe")
    await driving.run()
    driving.clock.step_wall(-3600 * NS)
    again = Rig(driving.design, on=driving)
    await again.run(12)
    assert again.states() == {State.HOLDING}
    assert not any(again.in_charge(name) for name in again.names)
    words = {happened.refused_set[1] for happened in again.history if happened.refused_set is not None}
    assert all("not newer than the last accepted" in one for one in words)
    assert words


# Trips and restarts ---------------------------------------------------------------------------------------------------


async def test_after_an_unclean_end_everybody_comes_up_on_hold(driving: Rig) -> None:
    """Killed a moment ago, the panel has not noticed yet: the safe hold begins in the first period."""
    before = told(driving)
    again = Rig(driving.design, ended_cleanly=False, on=driving)
    await again.run()
    assert again.states() == {State.HOLDING}
    assert {hold.latched_by for hold in again.standing.holds} == {Start.RESTART}
    assert told(again) == pytest.approx(before - 5.0)


async def test_after_an_unclean_end_only_a_rearm_drives_again(driving: Rig) -> None:
    """However long everything is clean."""
    again = Rig(driving.design, ended_cleanly=False, on=driving)
    await again.run(30)
    assert again.states() == {State.HOLDING}
    again.ask("rearm all")
    await again.run()
    assert again.answers[-1].state is RequestState.APPLIED
    assert again.states() == {State.FROZEN}
    before = told(again)
    await again.run()
    assert again.states() == {State.DRIVING}
    assert np.abs(told(again) - before).max() <= MOST_PERCENT


async def test_a_killed_control_trips_the_panel_and_the_next_start_leaves_it_alone_until_a_rearm(driving: Rig) -> None:
    """2 s without a heartbeat: local action. The new heartbeat ends the trip, the sections stay with the panel."""
    driving.clock.spend(5 * NS)
    assert tripped(driving)
    again = Rig(driving.design, ended_cleanly=False, on=driving)
    await again.run(10)
    assert not tripped(again)
    assert again.states() == {State.HOLDING}
    assert not any(again.in_charge(name) for name in again.names)
    assert all(sent.names == ["panel.heartbeat"] for sent in again.link.sent)
    again.ask("rearm tank-4")
    shown = again.told("tank-4")
    await again.run()
    assert again.in_charge("tank-4")
    assert again.told("tank-4") == pytest.approx(shown)
    await again.run()
    assert again.state("tank-4") is State.DRIVING
    assert abs(again.told("tank-4") - shown) <= MOST_PERCENT
    assert not again.in_charge("tank-3")


async def test_a_clean_start_on_a_tripped_panel_loses_one_period(driving: Rig) -> None:
    """The panel gives no section away while it is tripped; the first heartbeat ends that, the second set is taken."""
    driving.clock.spend(5 * NS)
    again = Rig(driving.design, on=driving)
    await again.run()
    assert again.verdicts() == {Verdict.UNWRITTEN}
    assert not any(again.in_charge(name) for name in again.names)
    await again.run()
    assert again.states() == {State.DRIVING}


async def test_a_released_plant_goes_back_to_its_panel(driving: Rig) -> None:
    """Who only watches must not leave a panel believing that somebody drives."""
    driving.ask("authority observe")
    await driving.run()
    assert driving.states() == {State.WATCHING}
    assert driving.link.sent[-1].bits == dict.fromkeys(driving.names, False)
    assert driving.link.sent[-1].inputs == {}
    assert not any(driving.in_charge(name) for name in driving.names)
    await driving.run(10)
    assert told(driving) == pytest.approx(np.full(8, 30.0))


async def test_handing_back_is_repeated_until_it_is_acknowledged(driving: Rig) -> None:
    """A bit the panel did not take is written again in the next period."""
    driving.link.refuses = {"tank-4.in_charge"}
    driving.ask("authority observe")
    await driving.run(2)
    assert driving.link.sent[-1].bits == {"tank-4": False}
    driving.link.refuses = set()
    await driving.run(2)
    assert driving.link.sent[-1].bits == {}
    assert not driving.in_charge("tank-4")


async def test_an_observer_does_not_keep_a_dead_run_alive(driving: Rig) -> None:
    """Killed, and restarted in observe before the watchdog ran out: without a heartbeat of ours it does run out."""
    again = Rig(driving.design, authority=Authority.OBSERVE, ended_cleanly=False, on=driving)
    await again.run(3)
    assert again.link.sent == []
    await again.run(6)
    assert not any(again.in_charge(name) for name in again.names)
    assert again.link.sent[-1].names == ["panel.heartbeat"]
    await again.run(8)
    assert told(again) == pytest.approx(np.full(8, 30.0))


async def test_authority_taken_after_an_unclean_end_still_wants_a_rearm(driving: Rig) -> None:
    """No detour through observe sheds the latch."""
    again = Rig(driving.design, authority=Authority.OBSERVE, ended_cleanly=False, on=driving)
    await again.run(12)
    again.ask("authority full")
    await again.run(8)
    assert again.states() == {State.HOLDING}
    assert all(not sent.inputs for sent in again.link.sent)
