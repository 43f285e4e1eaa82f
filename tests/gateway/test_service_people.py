"""The service and the people around it, in virtual time: requests, authority, and how the last run ended."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from gateway.authority import Authority
from gateway.design import PlantDesign
from gateway.hold import State
from gateway.journal import Previous, RunEnd
from gateway.plantfile.plant import SiteKind
from gateway.requests import RequestState
from gateway.sentences import Level
from gateway.service import TAKE_OVER_PERIODS
from gateway.signals import Reading
from gateway.verdict import Verdict
from tests.gateway.running import WHO, running, states

LIVE = SiteKind.LIVE


# Requests -------------------------------------------------------------------------------------------------------------


async def test_requests_are_answered_journaled_and_told(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Applied or refused, with the reason, by whom, and in which period."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(3)
        good, bad = run.ask("hold tank-4"), run.ask("rearm tank-5")
        await run.periods(1)
        k = run.recorded()[-1].k
        assert (run.answer(good).state, run.answer(good).k) == (RequestState.APPLIED, k)
        assert run.answer(bad).state is RequestState.REFUSED
        assert "not on hold" in run.answer(bad).reason
        assert [(one.request, one.who, one.state, one.k) for one in run.outcomes()] == [
            (good, WHO, "applied", k),
            (bad, WHO, "refused", k),
        ]
        assert [notice.level for notice in run.said("request")] == [Level.INFO, Level.WARNING]


async def test_a_request_nobody_can_read_is_refused_before_it_reaches_a_period(
    tarn_row: PlantDesign, tmp_path: Path
) -> None:
    """And told and journaled like any other."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(2)
        number, old = run.ask("hold tank-44"), run.ask("hold tank-4", age_s=60)
        await run.periods(2)
        assert "tank-4" in run.answer(number).reason
        assert "void" in run.answer(old).reason
        assert [one.state for one in run.outcomes()] == ["refused", "refused"]
        assert len(run.said("request")) == len(run.events("request")) == 2
        assert states(run) == {State.DRIVING}


async def test_a_target_is_driven_to(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """By request, on the running plant."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(2)
        run.ask("target tank-2.level 22")
        await run.periods(90)
        assert run.plant.truth()["tank-2.level"] == pytest.approx(22.0, abs=0.2)


async def test_hold_and_rearm_from_asking_to_driving(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """A person's whole detour, as the journal tells it."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(3)
        run.ask("hold tank-4")
        await run.periods(8)
        run.ask("rearm tank-4")
        await run.periods(2)
        story = [
            (event.detail["before"], event.detail["after"])
            for event in run.events("transition")
            if event.section == "tank-4"
        ]
        assert story == [
            ("frozen", "driving"),
            ("driving", "holding"),
            ("holding", "frozen"),
            ("frozen", "driving"),
        ]


async def test_a_rehearsal_makes_the_next_syntheses_late(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """As many as were asked for."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(2)
        run.ask("rehearse slow 2")
        await run.periods(3)
        verdicts = [record.sections[0].verdict for record in run.recorded()[2:]]
        assert verdicts == [Verdict.LATE, Verdict.LATE, Verdict.ON_TIME]


# Authority and restarts -----------------------------------------------------------------------------------------------


async def test_a_live_site_is_only_watched_before_its_inputs_were_read(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Then the authority asked for is taken, and said; the sections drive one period later."""
    async with running(tarn_row, tmp_path, site=LIVE, authority=Authority.LIMITED) as run:
        await run.periods(3)
        by_period = [record.sections[0].state for record in run.recorded()]
        assert by_period == [State.WATCHING, State.FROZEN, State.DRIVING]
        (notice,) = run.said("authority")
        assert (notice.detail["after"], notice.detail["who"]) == ("limited", "the command that started it")


async def test_full_authority_over_a_live_site_is_denied_without_a_record(
    tarn_row: PlantDesign, tmp_path: Path
) -> None:
    """And said as something a person must know."""
    async with running(tarn_row, tmp_path, site=LIVE) as run:
        await run.periods(5)
        (notice,) = run.said("authority")
        assert notice.level is Level.ERROR
        assert "soak record" in notice.sentence
        assert states(run) == {State.WATCHING}


async def test_a_person_who_insists_is_heard_loudly(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """The override is an error in the log and an event in the journal."""
    async with running(tarn_row, tmp_path, site=LIVE, override=True) as run:
        await run.periods(3)
        (event,) = run.events("authority")
        assert event.detail["overridden"] is True
        assert "no passed soak record" in event.sentence
        assert run.said("authority")[0].level is Level.ERROR
        assert states(run) == {State.DRIVING}


async def test_inputs_that_cannot_be_read_deny_the_authority_in_the_end(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Nobody waits in silence for a pump that does not answer: it is named."""
    async with running(tarn_row, tmp_path, site=LIVE, authority=Authority.LIMITED) as run:
        run.link.shows["tank-4.pump"] = Reading(None, 0x80310000)
        await run.periods(TAKE_OVER_PERIODS)
        assert run.said("authority") == []
        await run.periods(1)
        (notice,) = run.said("authority")
        assert "tank-4.pump" in notice.sentence
        assert states(run) == {State.WATCHING}


async def test_a_persons_word_about_authority_is_newer_than_the_commands(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Asked to observe before the command's authority could be taken: it is not taken any more."""
    async with running(tarn_row, tmp_path, site=LIVE, authority=Authority.LIMITED) as run:
        run.link.shows["tank-4.pump"] = Reading(None, 0x80310000)
        await run.periods(2)
        run.ask("authority observe")
        await run.periods(1)
        run.link.shows.clear()
        await run.periods(4)
        assert states(run) == {State.WATCHING}


async def test_after_a_clean_end_the_next_run_drives_at_once(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """The same plant, the same journal."""
    async with running(tarn_row, tmp_path) as first:
        await first.periods(3)
    async with running(tarn_row, tmp_path, after=first) as second:
        await second.periods(1)
        assert second.journal.previous.previous is Previous.CLEAN
        assert states(second) == {State.DRIVING}


@pytest.mark.parametrize("how", [RunEnd.FAILED, RunEnd.HELD])
async def test_after_any_other_end_the_next_run_starts_on_hold(
    tarn_row: PlantDesign, tmp_path: Path, how: RunEnd
) -> None:
    """And drives only after a rearm."""
    async with running(tarn_row, tmp_path, how=how) as first:
        await first.periods(3)
    async with running(tarn_row, tmp_path, after=first) as second:
        await second.periods(8)
        assert states(second) == {State.HOLDING}
        second.ask("rearm all")
        await second.periods(2)
        assert states(second) == {State.DRIVING}


async def test_the_tally_names_who_is_held(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """And keeps a latch in mind that watching hides: such a run must not count as a clean one."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(2)
        run.ask("hold tank-4")
        await run.periods(1)
        assert (run.service.tally.held, run.service.tally.latched) == (("tank-4",), True)
        run.ask("authority observe")
        await run.periods(1)
        assert (run.service.tally.held, run.service.tally.latched) == ((), True)


async def test_a_plant_without_a_panel_is_driven_all_the_same(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Inputs go out alone; nothing is handed back, since nobody is there."""
    alone = replace(tarn_row, plant=replace(tarn_row.plant, panel=None))
    async with running(alone, tmp_path) as run:
        await run.periods(5)
        assert states(run) == {State.DRIVING}
        assert all(list(sent.inputs) == sent.names for sent in run.link.sent)
