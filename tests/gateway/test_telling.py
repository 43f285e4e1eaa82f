"""Tests of `gateway.telling`: everything is recorded, and only what changed is said."""

from __future__ import annotations

from dataclasses import replace
from math import isnan

import numpy as np
import pytest

from gateway.design import PlantDesign
from gateway.hold import State
from gateway.journal import PeriodRecord
from gateway.sentences import Kind, Notice
from gateway.signals import Quality, Reading
from gateway.telling import Told, layout_of, notices_of, record_of, transition_events, transition_lines
from gateway.verdict import Verdict
from tests.gateway.virtual import Rig

WALL_NS = 1_735_786_800_000_000_000
NOTHING_TOLD = Told({}, None)


class Speaker:
    """What is said of one run, period by period."""

    def __init__(self, rig: Rig) -> None:
        self.rig = rig
        self.told = NOTHING_TOLD

    async def run(self, periods: int = 1) -> list[Notice]:
        """Run periods; what was said of them besides transitions."""
        said: list[Notice] = []
        for _ in range(periods):
            (happened,) = await self.rig.run()
            notices, self.told = notices_of(self.rig.design, self.told, happened)
            said += notices
        return said


@pytest.fixture
async def speaker(rig: Rig) -> Speaker:
    """A run whose beginning was told."""
    speaker = Speaker(rig)
    await speaker.run(5)
    return speaker


def record(rig: Rig) -> PeriodRecord:
    """The record of the last period."""
    return record_of(rig.design, layout_of(rig.design), rig.standing, rig.history[-1], WALL_NS)


# The record -----------------------------------------------------------------------------------------------------------


def test_the_layout_names_every_number(tarn_row: PlantDesign) -> None:
    """Signals and estimates by section, panel signals at the end."""
    layout = layout_of(tarn_row)
    assert layout.sections[4].measured == ("level", "consumer")
    assert layout.sections[3].measured == ("level",)
    assert layout.sections[3].driven == ("pump",)
    assert layout.sections[3].estimated == ("level", "pump_flow", "consumer disturbance")
    assert layout.panel == ("permit", "tripped", "clock", "accepted", "refusal")


async def test_a_record_has_the_length_its_layout_says(rig: Rig) -> None:
    """For every section, also in a period in which nothing arrived."""
    layout = layout_of(rig.design)
    await rig.run(2)
    rig.link.direct.cut = True
    await rig.run()
    for row, names in zip(record(rig).sections, layout.sections, strict=True):
        assert len(row.measured) == len(names.measured)
        assert len(row.estimates) == len(names.estimated)
        assert len(row.wanted) == len(row.written) == len(names.driven)


async def test_readings_are_recorded_as_they_came_with_what_they_were_worth(rig: Rig) -> None:
    """Raw value, status and quality side by side; what did not arrive is missing."""
    await rig.run(2)
    rig.link.shows["tank-4.level"] = Reading("20.0", 0, 1, 2)
    rig.link.shows["tank-5.level"] = None
    await rig.run()
    rows = record(rig).sections
    assert (rows[3].measured[0].value, rows[3].measured[0].quality) == ("20.0", Quality.BAD)
    assert rows[4].measured[0].quality is Quality.MISSING
    assert rows[0].measured[0].value == rig.history[-1].gathered.readings["tank-1.level"].value


async def test_states_verdicts_and_inputs_are_recorded(rig: Rig) -> None:
    """What was wanted beside what was written."""
    await rig.run(2)
    rig.ask("hold tank-4")
    await rig.run()
    row = record(rig).sections[3]
    assert (row.state, row.verdict) == (State.HOLDING, Verdict.ON_TIME)
    assert row.written == (rig.told("tank-4"),)
    assert row.wanted == pytest.approx(row.written)


async def test_estimates_are_recorded_in_si(rig: Rig) -> None:
    """Level in metres, flow and disturbance in cubic metres per second, the measured consumer counted in."""
    rig.plant.provoke("set tank-5.consumer 6")
    await rig.run(120)
    level, flow, disturbance = record(rig).sections[4].estimates
    assert level == pytest.approx(rig.plant.truth()["tank-5.level"] / 100, abs=0.001)
    assert flow == pytest.approx(70e-6 * rig.told("tank-5") / 100, rel=0.05)
    assert disturbance == pytest.approx(6e-6, rel=0.2)


async def test_a_late_period_is_recorded_without_a_plan(rig: Rig) -> None:
    """No iterations, no residual, nothing wanted; the frozen inputs were written all the same."""
    await rig.run(2)
    rig.ask("rehearse slow 1")
    await rig.run()
    late = record(rig)
    assert (late.iterations, late.worst_residual_spans) == (None, None)
    assert all(isnan(row.wanted[0]) for row in late.sections)
    assert not any(isnan(row.written[0]) for row in late.sections)


async def test_a_period_is_dated_by_its_due_instant(rig: Rig) -> None:
    """And carries its k, its slack and the panel's own signals."""
    await rig.run(2)
    last = record(rig)
    assert (last.k, last.due_ns) == (rig.k - 1, WALL_NS)
    assert last.slack_us == rig.history[-1].timing.slack_us
    assert last.panel[0].value is True
    assert last.panel[3].value == rig.k - 2


async def test_a_first_period_without_any_reading_can_be_recorded(rig: Rig) -> None:
    """Nothing is known, and the record says that."""
    rig.link.direct.cut = True
    await rig.run()
    first = record(rig)
    assert {row.verdict for row in first.sections} == {Verdict.SEVERED}
    assert all(row.measured[0].quality is Quality.MISSING for row in first.sections)


# What is said ---------------------------------------------------------------------------------------------------------


async def test_a_start_says_that_the_permit_is_on(rig: Rig) -> None:
    """And no quality, since nothing was known to change from."""
    assert [notice.kind for notice in await Speaker(rig).run()] == [Kind.PERMIT]


async def test_a_quiet_night_is_quiet(speaker: Speaker) -> None:
    """Nothing changed, nothing is said."""
    assert await speaker.run(20) == []


async def test_a_quality_is_told_when_it_changes_and_when_it_changes_back(speaker: Speaker) -> None:
    """Once each, naming signal, section and what it reads."""
    speaker.rig.plant.provoke("dropout tank-4.level for 2 s")
    lost = await speaker.run(3)
    found = await speaker.run(5)
    assert [(notice.kind, notice.section) for notice in lost] == [(Kind.QUALITY, "tank-4")]
    assert "tank-4.level is bad now, it was good" in lost[0].sentence
    assert ["tank-4.level is good now, it was bad" in notice.sentence for notice in found] == [True]


async def test_the_permit_is_told_when_it_changes(speaker: Speaker) -> None:
    """Off once, on once."""
    speaker.rig.plant.provoke("permit off for 2 s")
    said = await speaker.run(8)
    assert [(notice.kind, notice.detail["on"]) for notice in said] == [(Kind.PERMIT, False), (Kind.PERMIT, True)]


async def test_a_lost_link_is_told_once_by_the_link_alone(speaker: Speaker) -> None:
    """No flood of qualities when it goes, none when it comes back: what is as it was needs no sentence."""
    speaker.rig.link.direct.cut = True
    gone = await speaker.run(2)
    speaker.rig.link.direct.cut = False
    back = await speaker.run(2)
    assert gone + back == []


async def test_a_trip_found_after_a_lost_link_is_told(speaker: Speaker) -> None:
    """And its end, one heartbeat later."""
    speaker.rig.link.direct.cut = True
    await speaker.run(8)
    speaker.rig.link.direct.cut = False
    said = await speaker.run(2)
    assert [(notice.kind, notice.detail["tripped"]) for notice in said] == [(Kind.PANEL, True), (Kind.PANEL, False)]


async def test_an_unanswered_write_is_told_with_its_set(speaker: Speaker) -> None:
    """Every period it happens in."""
    speaker.rig.link.direct.drop_answers = True
    said = await speaker.run(2)
    assert [(notice.kind, notice.detail["set"]) for notice in said] == [
        (Kind.WRITE_UNKNOWN, speaker.rig.k - 2),
        (Kind.WRITE_UNKNOWN, speaker.rig.k - 1),
    ]


async def test_a_refused_set_is_told_in_the_panels_words(speaker: Speaker) -> None:
    """One period later, when they can be read, but with its own number."""
    clock_ms = speaker.rig.plant.read_all()["panel.clock"].value
    assert isinstance(clock_ms, int)
    speaker.rig.link.shows["panel.clock"] = Reading(clock_ms - 1000)
    await speaker.run()
    speaker.rig.link.shows.clear()
    (notice,) = await speaker.run()
    assert notice.kind is Kind.SET_REFUSED
    assert notice.detail["set"] == speaker.rig.k - 2
    assert "expired" in notice.sentence


async def test_a_refused_set_keeps_its_number_over_skipped_periods(speaker: Speaker) -> None:
    """It is the set that was sent, not the period before this one."""
    speaker.rig.link.direct.drop_answers, speaker.rig.link.refuses = True, {"panel.period"}
    await speaker.run()
    sent_k = speaker.rig.k - 1
    speaker.rig.link.direct.drop_answers, speaker.rig.link.refuses = False, set()
    speaker.rig.skip(2)
    (notice,) = await speaker.run()
    assert notice.detail["set"] == sent_k


async def test_a_broken_synthesis_is_told_with_its_reason(speaker: Speaker) -> None:
    """It is our fault, and somebody must look."""
    happened = replace(speaker.rig.history[-1], broken="a price is not finite")
    notices, _ = notices_of(speaker.rig.design, speaker.told, happened)
    (notice,) = notices
    assert "a price is not finite" in notice.sentence


# Transitions ----------------------------------------------------------------------------------------------------------


async def test_every_transition_is_one_event(rig: Rig) -> None:
    """With section, states, cause and slack."""
    await rig.run()
    events = transition_events(rig.design, rig.history[-1])
    assert [event.section for event in events] == rig.names
    assert {event.detail["before"] for event in events} == {State.FROZEN}
    assert {event.detail["after"] for event in events} == {State.DRIVING}


async def test_sections_that_change_alike_share_one_line(rig: Rig) -> None:
    """One cause, one line; a section that changes in its own way has its own."""
    await rig.run(3)
    rig.plant.provoke("dropout tank-4.level")
    rig.ask("rehearse slow 1")
    (happened,) = await rig.run()
    lines = transition_lines(rig.design, happened)
    assert len(happened.transitions) == 8
    assert len(lines) == 2
    assert [line.section for line in lines].count("tank-4") == 1


async def test_no_transition_no_line(rig: Rig) -> None:
    """A period in which everybody goes on as before."""
    await rig.run(2)
    assert transition_events(rig.design, rig.history[-1]) == transition_lines(rig.design, rig.history[-1]) == []


async def test_a_record_survives_inputs_without_number(rig: Rig) -> None:
    """NaN stands for none, in floats and nowhere else."""
    await rig.run()
    happened = replace(rig.history[-1], wanted=np.full(8, np.nan), written=np.full(8, np.nan))
    rows = record_of(rig.design, layout_of(rig.design), rig.standing, happened, WALL_NS).sections
    assert all(isinstance(row.written[0], float) and isnan(row.written[0]) for row in rows)
