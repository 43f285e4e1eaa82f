"""Tests of `gateway.orders`: what people ask, applied whole or refused whole, and answered with a reason."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gateway.authority import Authority
from gateway.design import PlantDesign
from gateway.hold import Ask, State
from gateway.orders import Answer, Orders, apply_requests, change_authority, settle
from gateway.plantfile.plant import SiteKind
from gateway.requests import Asked, RequestState, parse_request
from tests.gateway.virtual import Rig

APPLIED, REFUSED = RequestState.APPLIED, RequestState.REFUSED


@pytest.fixture
async def driving(rig: Rig) -> Rig:
    """A run that drives every section."""
    await rig.run(3)
    return rig


def asked(rig: Rig, *words: str) -> list[Asked]:
    """Requests as the desk hands them over."""
    return [
        Asked(number, rig.clock.wall_ns(), f"person-{number}@bench-host", one, parse_request(one, rig.design.plant))
        for number, one in enumerate(words, 1)
    ]


def orders(rig: Rig, *words: str, site: SiteKind = SiteKind.BENCH) -> Orders:
    """What these requests amount to."""
    return apply_requests(rig.design, site, rig.standing, asked(rig, *words))


def states(answers: tuple[Answer, ...] | list[Answer]) -> dict[str, tuple[RequestState, str]]:
    """Answers by the words that asked."""
    return {answer.asked.words: (answer.state, answer.reason) for answer in answers}


def test_without_requests_nothing_changes(driving: Rig) -> None:
    """The standing is the same object."""
    nothing = orders(driving)
    assert nothing.standing is driving.standing
    assert (nothing.asks, nothing.answers, nothing.pending, nothing.slow_periods) == ({}, (), (), 0)


def test_a_target_is_aimed_at_from_this_period_on(driving: Rig) -> None:
    """The others stay, and the standing that came in is not edited."""
    moved = orders(driving, "target tank-2.level 24")
    assert moved.standing.targets["tank-2.level"] == 24.0
    assert moved.standing.targets["tank-3.level"] == 20.0
    assert driving.standing.targets["tank-2.level"] == 20.0
    assert states(moved.answers) == {"target tank-2.level 24": (APPLIED, "")}


def test_of_two_targets_the_later_stands(driving: Rig) -> None:
    """Requests are applied in order."""
    moved = orders(driving, "target tank-2.level 24", "target tank-2.level 16")
    assert moved.standing.targets["tank-2.level"] == 16.0
    assert len(moved.answers) == 2


def test_a_hold_is_asked_of_its_section(driving: Rig) -> None:
    """The hold table gives the answer, so it is still open."""
    held = orders(driving, "hold tank-4")
    assert held.asks == {3: [Ask.HOLD]}
    assert held.answers == ()
    assert [(one.words, places, ask) for one, places, ask in held.pending] == [("hold tank-4", (3,), Ask.HOLD)]


def test_all_means_every_section(driving: Rig) -> None:
    """One request, eight asks."""
    assert orders(driving, "hold all").asks == {i: [Ask.HOLD] for i in range(8)}


def test_asks_keep_their_order(driving: Rig) -> None:
    """A hold after a rearm is a hold."""
    assert orders(driving, "rearm tank-4", "hold tank-4").asks == {3: [Ask.REARM, Ask.HOLD]}


async def test_the_hold_table_answers_for_its_sections(driving: Rig) -> None:
    """Applied where it took effect, refused with the table's reason where it did not."""
    driving.ask("hold tank-4")
    driving.ask("rearm tank-5")
    await driving.run()
    assert states(driving.answers) == {
        "hold tank-4": (APPLIED, ""),
        "rearm tank-5": (REFUSED, "tank-5: rearm refused: the section is not on hold"),
    }


async def test_a_request_that_takes_effect_somewhere_is_applied_and_names_the_rest(driving: Rig) -> None:
    """Rearm all, while only tank 4 is on hold: seven refusals beside one success."""
    driving.ask("hold tank-4")
    await driving.run(8)
    driving.ask("rearm all")
    await driving.run()
    state, reason = states(driving.answers)["rearm all"]
    assert state is APPLIED
    assert reason.count("the section is not on hold") == 7
    assert "tank-4" not in reason


async def test_two_people_who_rearm_in_one_period_are_answered_alike(driving: Rig) -> None:
    """Neither is refused because the other was faster."""
    driving.ask("hold tank-4")
    await driving.run(8)
    driving.ask("rearm tank-4")
    driving.ask("rearm all")
    await driving.run()
    assert driving.state("tank-4") is State.FROZEN
    one, other = driving.answers[-2:]
    assert (one.state, one.reason) == (APPLIED, "")
    assert other.state is APPLIED


def test_authority_is_changed_for_the_whole_gateway(driving: Rig) -> None:
    """Every section is asked to let go; who asked is kept for the log."""
    released = orders(driving, "authority observe")
    assert released.standing.authority.level is Authority.OBSERVE
    assert released.asks == {i: [Ask.RELEASE] for i in range(8)}
    assert released.changed is not None
    assert released.changed[1] == "person-1@bench-host"
    assert states(released.answers) == {"authority observe": (APPLIED, "")}


def test_between_full_and_limited_nobody_lets_go(driving: Rig) -> None:
    """Only the band changes, around what every input is told now."""
    limited = orders(driving, "authority limited")
    assert limited.asks == {}
    low, high = limited.standing.authority.bands()["tank-4.pump"]
    assert low == pytest.approx(driving.told("tank-4") - 10.0)
    assert high == pytest.approx(driving.told("tank-4") + 10.0)


def test_a_denied_authority_changes_nothing(driving: Rig) -> None:
    """And says why."""
    denied = orders(driving, "authority full")
    assert denied.standing is driving.standing
    assert denied.changed is None
    assert states(denied.answers) == {"authority full": (REFUSED, "Authority is full already.")}


def test_unread_inputs_cannot_be_taken_over(driving: Rig) -> None:
    """They are named, and the change does not happen by halves."""
    watching = orders(driving, "authority observe").standing
    unread = replace(watching, last=np.where(np.arange(8) == 3, np.nan, watching.last))
    decided = apply_requests(driving.design, SiteKind.BENCH, unread, asked(driving, "authority full"))
    ((state, reason),) = states(decided.answers).values()
    assert state is REFUSED
    assert "tank-4.pump" in reason
    assert decided.standing is unread


def test_a_live_site_wants_a_soak_record_for_full_authority(driving: Rig, tarn_row: PlantDesign) -> None:
    """Limited is given without; a person may insist on full, which is noted."""
    watching = orders(driving, "authority observe").standing
    ((state, reason),) = states(
        apply_requests(tarn_row, SiteKind.LIVE, watching, asked(driving, "authority full")).answers
    ).values()
    assert state is REFUSED
    assert "soak record" in reason
    limited = apply_requests(tarn_row, SiteKind.LIVE, watching, asked(driving, "authority limited"))
    assert limited.standing.authority.level is Authority.LIMITED
    insisted = change_authority(tarn_row, SiteKind.LIVE, watching, Authority.FULL, override=True)
    assert getattr(insisted, "overridden", None) is True


def test_a_rehearsal_is_for_the_bench_alone(driving: Rig) -> None:
    """On a live site it is refused, and nothing becomes slow."""
    assert orders(driving, "rehearse slow 3").slow_periods == 3
    live = orders(driving, "rehearse slow 3", site=SiteKind.LIVE)
    assert live.slow_periods == 0
    assert states(live.answers) == {"rehearse slow 3": (REFUSED, "rehearsals are for bench sites only")}


async def test_every_request_is_answered_once(driving: Rig) -> None:
    """Whatever else is asked in the same period."""
    words = ["hold tank-4", "rearm all", "target tank-1.level 21", "authority limited", "rehearse slow 1", "hold all"]
    mixed = orders(driving, *words)
    _, happened = await driving.period.run(driving.k, driving.schedule.due_ns(driving.k), mixed.standing, mixed.asks)
    answers = settle(driving.design.plant, mixed, happened)
    assert sorted(answer.asked.number for answer in answers) == [1, 2, 3, 4, 5, 6]
