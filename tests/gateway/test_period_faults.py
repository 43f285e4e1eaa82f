"""What breaks at the plant, in virtual time: each fault freezes its section in the period that can first know of it."""

from __future__ import annotations

from dataclasses import replace
from math import inf, nan

import numpy as np
import pytest

from gateway.admit_rules import DEFAULTS, plan_admission, readings_until_frozen
from gateway.design import PlantDesign
from gateway.hold import State
from gateway.signals import Quality, Reading
from gateway.verdict import Verdict
from tests.gateway.virtual import Rig, with_hold

OTHERS = [f"tank-{number}" for number in (1, 2, 3, 5, 6, 7, 8)]
BELIEVED_AGAIN = DEFAULTS.readmit_after


@pytest.fixture
async def driving(rig: Rig) -> Rig:
    """A run that drives every section."""
    await rig.run(5)
    return rig


def alone(rig: Rig, verdict: Verdict) -> bool:
    """Whether tank 4 alone is frozen, with this verdict, while all others drive."""
    return (
        rig.state("tank-4") is State.FROZEN
        and rig.verdict("tank-4") is verdict
        and all(rig.state(name) is State.DRIVING and rig.verdict(name) is Verdict.ON_TIME for name in OTHERS)
    )


@pytest.mark.parametrize(
    ("line", "quality"),
    [
        ("dropout tank-4.level", Quality.BAD),
        ("nan tank-4.level", Quality.NOT_FINITE),
        ("bias tank-4.level 6", Quality.JUMPED),
        ("bias tank-4.level -6", Quality.JUMPED),
    ],
)
async def test_a_transmitter_fault_freezes_its_section_in_its_first_period(
    driving: Rig, line: str, quality: Quality
) -> None:
    """And no other section; the pump stays where it was told to be."""
    before = driving.told("tank-4")
    driving.plant.provoke(line)
    await driving.run()
    assert driving.quality("tank-4.level") is quality
    assert alone(driving, Verdict.BLIND)
    assert driving.told("tank-4") == before


@pytest.mark.parametrize(
    ("value", "quality"),
    [
        ("20.0", Quality.BAD),
        (True, Quality.BAD),
        (None, Quality.BAD),
        ([20.0], Quality.BAD),
        (nan, Quality.NOT_FINITE),
        (inf, Quality.NOT_FINITE),
        (10**400, Quality.NOT_FINITE),
        (55.0, Quality.OUT_OF_RANGE),
        (-3, Quality.OUT_OF_RANGE),
    ],
)
async def test_a_peer_may_send_what_it_likes(driving: Rig, value: object, quality: Quality) -> None:
    """Values of the wrong type, empty or absurd are qualities, never exceptions."""
    driving.link.shows["tank-4.level"] = Reading(value)
    await driving.run()
    assert driving.quality("tank-4.level") is quality
    assert alone(driving, Verdict.BLIND)
    driving.link.shows.clear()
    await driving.run()
    assert driving.states() == {State.DRIVING}


async def test_a_level_that_does_not_arrive_severs_its_section(driving: Rig) -> None:
    """The rest of the link is there, and the rest of the plant drives."""
    driving.link.shows["tank-4.level"] = None
    await driving.run()
    assert driving.quality("tank-4.level") is Quality.MISSING
    assert alone(driving, Verdict.SEVERED)


@pytest.mark.parametrize("line", ["dropout tank-4.level for 1 s", "nan tank-4.level for 1 s"])
async def test_a_short_transmitter_fault_is_forgiven(driving: Rig, line: str) -> None:
    """The first usable reading drives again, from where the pump was left."""
    before = driving.told("tank-4")
    driving.plant.provoke(line)
    await driving.run(2)
    assert driving.told("tank-4") == before
    await driving.run()
    assert driving.states() == {State.DRIVING}
    assert abs(driving.told("tank-4") - before) <= 10.0 + 1e-9


async def test_a_lasting_transmitter_fault_latches_a_hold(driving: Rig, tarn_row: PlantDesign) -> None:
    """As many misses as the table says; then only a person's word and clean periods lead back."""
    driving.plant.provoke("dropout tank-4.level")
    await driving.run(tarn_row.plant.hold.latch_after - 1)
    assert driving.state("tank-4") is State.FROZEN
    await driving.run()
    assert driving.state("tank-4") is State.HOLDING
    driving.plant.provoke("clear tank-4.level")
    await driving.run(40)
    assert driving.state("tank-4") is State.HOLDING
    driving.ask("rearm tank-4")
    await driving.run(2)
    assert driving.states() == {State.DRIVING}


async def test_after_blindness_the_estimate_starts_from_the_plant(driving: Rig) -> None:
    """The level ran down unseen for 30 s; the estimate jumps to what is read, in the first period that reads it."""
    driving.plant.provoke("dropout tank-4.level")
    await driving.run(60)
    driving.plant.provoke("clear tank-4.level")
    (happened,) = await driving.run()
    shown = happened.gathered.readings["tank-4.level"].value
    assert driving.standing.estimate is not None
    scaling, at = driving.design.scaling, int(driving.design.network.x_at[3])
    level_m = driving.standing.estimate.x[at] * scaling.x_unit[at] + scaling.x_zero[at]
    assert isinstance(shown, float)
    assert shown < 19.0
    assert level_m == pytest.approx(shown / 100)


async def test_a_frozen_transmitter_is_found_within_the_provable_number_of_readings(driving: Rig) -> None:
    """So many equal readings no living transmitter shows; the section freezes in the period that proves it.

    The number follows from noise and resolution, and the resolution is learned: a minute after the start it is known.
    """
    level = driving.design.outputs[3]
    declared = readings_until_frozen(level.noise, max(level.instrument.resolution, level.width / 2**16))
    await driving.run(60)
    needed = driving.standing.admission.signals[3].needed
    assert declared is not None
    assert needed is not None
    assert declared <= needed <= declared + 2
    driving.plant.provoke("freeze tank-4.level")
    for _ in range(needed):
        await driving.run()
        if driving.quality("tank-4.level") is Quality.FROZEN:
            break
        assert driving.states() == {State.DRIVING}
    assert driving.quality("tank-4.level") is Quality.FROZEN
    assert alone(driving, Verdict.BLIND)


async def test_a_jump_that_lasts_is_believed_again_but_a_person_saw_the_section_freeze(tarn_row: PlantDesign) -> None:
    """Five readings at the new level: where the table latches later than that, the section drives by it again."""
    rig = Rig(with_hold(tarn_row, replace(tarn_row.plant.hold, latch_after=10)))
    await rig.run(5)
    rig.plant.provoke("bias tank-4.level 6")
    verdicts = [happened.verdicts[3] for happened in await rig.run(BELIEVED_AGAIN)]
    assert verdicts == [Verdict.BLIND] * (BELIEVED_AGAIN - 1) + [Verdict.ON_TIME]
    assert rig.state("tank-4") is State.DRIVING


async def test_a_jump_that_lasts_latches_tarn_row(driving: Rig, tarn_row: PlantDesign) -> None:
    """Its table latches before the new level is believed."""
    assert tarn_row.plant.hold.latch_after < BELIEVED_AGAIN
    driving.plant.provoke("bias tank-4.level 6")
    await driving.run(BELIEVED_AGAIN + 1)
    assert driving.quality("tank-4.level") is Quality.GOOD
    assert driving.state("tank-4") is State.HOLDING


async def test_a_small_bias_cannot_be_found(driving: Rig) -> None:
    """Said plainly: what a level could have done by itself is believed, and the plant ends up off by the bias."""
    driving.plant.provoke("bias tank-4.level 1.5")
    await driving.run(160)
    assert driving.states() == {State.DRIVING}
    assert all(set(happened.verdicts) == {Verdict.ON_TIME} for happened in driving.history)
    assert driving.plant.truth()["tank-4.level"] == pytest.approx(20.0 - 1.5, abs=0.2)


async def test_a_stuck_pump_cannot_be_found_from_its_level(driving: Rig) -> None:
    """Said plainly: nothing reads the pump back, so the section drives on, up to its limit, and the level stays off.

    The estimate books the missing flow as a consumer. No hard or rate limit is crossed; a person sees a pump at its
    limit and a level below target.
    """
    driving.plant.provoke("stuck tank-3.pump")
    driving.plant.provoke("set tank-3.consumer 12")
    await driving.run(160)
    assert all(set(happened.verdicts) == {Verdict.ON_TIME} for happened in driving.history)
    assert driving.state("tank-3") is State.DRIVING
    assert driving.told("tank-3") == 100.0
    assert driving.plant.truth()["tank-3.pump"] < 60.0
    assert driving.levels(20).mean(axis=0)[2] < 19.0


async def test_a_lost_measured_consumer_blinds_nobody(driving: Rig) -> None:
    """Its last good value is kept, and what changes meanwhile is estimated like any disturbance."""
    driving.plant.provoke("set tank-5.consumer 6")
    await driving.run(60)
    driving.plant.provoke("dropout tank-5.consumer")
    driving.plant.provoke("set tank-5.consumer 0")
    await driving.run(160)
    assert driving.quality("tank-5.consumer") is Quality.BAD
    assert all(set(happened.verdicts) == {Verdict.ON_TIME} for happened in driving.history)
    assert abs(driving.levels(40).mean(axis=0)[4] - 20.0) < 0.12


async def test_a_slow_synthesis_freezes_everybody_and_its_result_is_thrown_away(driving: Rig) -> None:
    """Late once: everybody keeps its last inputs for one period, and drives again in the next."""
    before = [driving.told(name) for name in driving.names]
    driving.ask("rehearse slow 1")
    await driving.run()
    assert driving.states() == {State.FROZEN}
    assert driving.verdicts() == {Verdict.LATE}
    assert [driving.told(name) for name in driving.names] == before
    assert np.isnan(driving.history[-1].wanted).all()
    assert driving.standing.iterate is None  # Nor does the next synthesis start from a plan a period too old.
    await driving.run()
    assert driving.states() == {State.DRIVING}


async def test_slow_syntheses_latch_when_the_table_says_so(driving: Rig, tarn_row: PlantDesign) -> None:
    """One less than `latch_after` in a row is forgiven, that many is not."""
    latch = tarn_row.plant.hold.latch_after
    driving.ask(f"rehearse slow {latch - 1}")
    await driving.run(latch)
    assert driving.states() == {State.DRIVING}
    await driving.run(tarn_row.plant.hold.latch_window)
    driving.ask(f"rehearse slow {latch}")
    await driving.run(latch)
    assert driving.states() == {State.HOLDING}


async def test_a_dead_transmitter_at_the_start_leaves_its_section_with_the_panel(rig: Rig) -> None:
    """Who cannot see a section does not take it: its pump stays at the panel's rest value, also on hold."""
    before = rig.told("tank-4")
    rig.plant.provoke("dropout tank-4.level")
    await rig.run(12)
    assert rig.state("tank-4") is State.HOLDING
    assert not rig.in_charge("tank-4")
    assert rig.told("tank-4") == before
    assert all(rig.state(name) is State.DRIVING and rig.in_charge(name) for name in OTHERS)


async def test_an_input_nobody_can_read_keeps_its_section_from_driving(rig: Rig) -> None:
    """Before a first command was read, nobody knows where the pump stands: its section waits, the others drive."""
    rig.link.shows["tank-4.pump"] = Reading(None, 0x80310000)
    await rig.run(2)
    assert alone(rig, Verdict.BLIND)
    assert not rig.in_charge("tank-4")
    rig.link.shows.clear()
    await rig.run()
    assert rig.states() == {State.DRIVING}


async def test_an_input_that_cannot_be_read_while_the_panel_drives_it_is_not_taken(rig: Rig) -> None:
    """The local action has moved it since our last word about it, which therefore stands for nothing."""
    await rig.run(5)
    rig.link.shows["tank-4.pump"] = None
    rig.plant.provoke("permit off for 0.9 s")
    await rig.run(3)
    assert alone(rig, Verdict.BLIND)
    assert not rig.in_charge("tank-4")
    rig.link.shows.clear()
    await rig.run()
    assert rig.state("tank-4") is State.DRIVING
    assert abs(rig.told("tank-4") - rig.link.sent[-1].told["tank-4.pump"]) <= 10.0 + 1e-9


async def test_an_input_that_cannot_be_read_for_a_while_is_where_it_was_told_to_be(driving: Rig) -> None:
    """While the section is ours, our own last acknowledged word stands in for the panel's."""
    driving.link.shows["tank-4.pump"] = Reading("stuck in transit")
    driving.ask("target tank-4.level 24")
    await driving.run(4)
    assert driving.states() == {State.DRIVING}
    for happened, sent in zip(driving.history[-4:], driving.link.sent[-4:], strict=True):
        assert abs(happened.written[3] - sent.told["tank-4.pump"]) <= 10.0 + 1e-9


def test_tarn_row_freezes_at_the_first_unusable_reading(tarn_row: PlantDesign) -> None:
    """What the tests above rely on."""
    assert plan_admission(tarn_row.plant).blind_after == 1
