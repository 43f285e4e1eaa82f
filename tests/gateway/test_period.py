"""Tests of `gateway.period` in virtual time: what a healthy plant sees of it, and how far its law reaches."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gateway.authority import BAND_SPANS, Authority
from gateway.design import PlantDesign
from gateway.hold import State
from gateway.requests import RequestState
from gateway.verdict import Verdict
from tests.gateway.virtual import Rig

SPAN_CM = 40.0
OFFSET_SPANS = 0.003
"""Largest mean error that counts as none."""


async def test_every_section_drives_in_the_first_period_after_a_clean_end(rig: Rig) -> None:
    """Nothing was wrong before and nothing is now: no period is lost."""
    await rig.run()
    assert rig.states() == {State.DRIVING}
    assert rig.verdicts() == {Verdict.ON_TIME}
    assert all(rig.in_charge(name) for name in rig.names)


async def test_the_first_inputs_start_from_what_the_panel_shows(rig: Rig, tarn_row: PlantDesign) -> None:
    """Taking over is bumpless: a plant at rest at its targets hardly moves."""
    before = [rig.told(name) for name in rig.names]
    await rig.run()
    assert np.abs(np.array(before) - [rig.told(name) for name in rig.names]).max() < 0.5


async def test_what_goes_out_is_what_the_panel_then_tells_the_pumps(rig: Rig) -> None:
    """Written, acknowledged and in force are one and the same."""
    for happened in await rig.run(5):
        assert happened.written.tolist() == pytest.approx(happened.wanted.tolist())
    assert [rig.told(name) for name in rig.names] == rig.history[-1].written.tolist()


async def test_a_set_is_ordered_as_the_panel_wants_it(rig: Rig) -> None:
    """Charge, inputs, expiry, counter, and the heartbeat at the very end; charge only where it is not ours yet."""
    await rig.run(2)
    first, second = rig.link.sent
    bits = [f"{name}.in_charge" for name in rig.names]
    rest = [*(f"{name}.pump" for name in rig.names), "panel.expires", "panel.period", "panel.heartbeat"]
    assert first.names == [*bits, *rest]
    assert second.names == rest
    assert second.counter("period") == rig.k - 1


async def test_a_set_is_valid_for_the_panels_window_and_no_longer(rig: Rig, tarn_row: PlantDesign) -> None:
    """Its expiry counts on the panel's own clock, as it was read this period."""
    await rig.run(3)
    assert tarn_row.plant.panel is not None
    read_ms = rig.history[-1].view.clock_ms
    assert read_ms is not None
    assert rig.link.sent[-1].counter("expires") == read_ms + round(tarn_row.plant.panel.window_s * 1e3)


async def test_the_heartbeat_counts_completed_periods(rig: Rig) -> None:
    """One more in every period, one per period."""
    await rig.run(5)
    beats = [sent.counter("heartbeat") for sent in rig.link.sent]
    assert beats == list(range(beats[0], beats[0] + 5))


async def test_the_heartbeat_wraps_where_the_panels_counter_does(rig: Rig) -> None:
    """After 2³² − 1 comes 0, which the panel takes."""
    await rig.run()
    rig.standing = replace(rig.standing, heartbeat=2**32 - 1)
    await rig.run()
    assert rig.link.sent[-1].counter("heartbeat") == 0
    assert rig.verdicts() == {Verdict.ON_TIME}


async def test_levels_settle_on_their_targets_without_offset(rig: Rig) -> None:
    """Mean error of the last 30 s below 0.3 % of span: nonlinear plant, consumers 3, 5 and 6 open, moved targets."""
    for line in ("set tank-3.consumer 8", "set tank-5.consumer 6", "set tank-6.consumer 8"):
        rig.plant.provoke(line)
    rig.ask("target tank-2.level 24")
    rig.ask("target tank-7.level 17")
    await rig.run(260)
    error = rig.levels(60).mean(axis=0) - [rig.standing.targets[signal.tag] for signal in rig.design.outputs]
    assert np.abs(error).max() < OFFSET_SPANS * SPAN_CM
    assert rig.standing.targets["tank-2.level"] == 24.0
    assert all(set(happened.verdicts) == {Verdict.ON_TIME} for happened in rig.history)


async def test_a_consumer_nobody_measures_is_found_and_answered(rig: Rig) -> None:
    """The pump of tank 3 ends up higher by about what its consumer takes: 8 of 70 cm3/s are 11 %."""
    await rig.run(20)
    before = rig.told("tank-3")
    rig.plant.provoke("set tank-3.consumer 8")
    await rig.run(120)
    assert rig.told("tank-3") - before == pytest.approx(100 * 8 / 70, abs=2.0)


async def test_observe_writes_nothing_but_the_heartbeat(tarn_row: PlantDesign) -> None:
    """Not even a bit: it reads, computes, and records what it would have written."""
    rig = Rig(tarn_row, authority=Authority.OBSERVE)
    rig.plant.provoke("set tank-3.consumer 8")
    for happened in await rig.run(40):
        assert np.isfinite(happened.wanted).all()
        assert np.isnan(happened.written).all()
    assert {tuple(sent.names) for sent in rig.link.sent} == {("panel.heartbeat",)}
    assert rig.states() == {State.WATCHING}


async def test_limited_stays_inside_its_band_though_it_would_go_further(rig: Rig) -> None:
    """10 % of span around the inputs found; the target asks for more, so the band is reached and kept."""
    await rig.run(5)
    found = {name: rig.told(name) for name in rig.names}
    rig.ask("authority limited")
    rig.ask("target tank-2.level 30")
    await rig.run(60)
    half = BAND_SPANS * 100.0
    for sent in rig.link.sent[5:]:
        for tag, value in sent.inputs.items():
            assert abs(value - found[tag.removesuffix(".pump")]) <= half + 1e-9
    assert rig.told("tank-2") == pytest.approx(found["tank-2"] + half)
    assert rig.states() == {State.DRIVING}


async def test_a_hold_keeps_inside_the_band_too(rig: Rig) -> None:
    """Tarn Row's ramp to 30 % ends at the band's edge; the section stays on hold in clean periods, ready for rearm."""
    await rig.run(5)
    found = rig.told("tank-4")
    rig.ask("authority limited")
    rig.ask("hold tank-4")
    await rig.run(12)
    assert rig.told("tank-4") == pytest.approx(found - BAND_SPANS * 100.0)
    assert rig.verdict("tank-4") is Verdict.ON_TIME
    assert rig.state("tank-4") is State.HOLDING


async def test_a_hold_request_ramps_to_the_safe_value_at_the_safe_rate(rig: Rig) -> None:
    """30 % at 10 %/s, from where the pump was, from the period that takes the request on."""
    await rig.run(5)
    before = rig.told("tank-4")
    rig.ask("hold tank-4")
    values = [happened.written[3] for happened in await rig.run(6)]
    ramp = [max(30.0, before - 5.0 * step) for step in range(1, 7)]
    assert values == pytest.approx(ramp)
    assert rig.state("tank-4") is State.HOLDING
    assert rig.answers[-1].state is RequestState.APPLIED


async def test_neighbours_plan_around_a_held_section_in_the_same_period(rig: Rig) -> None:
    """The plan of the very period that takes the hold has the ramp in it, step by step."""
    await rig.run(5)
    before = rig.told("tank-4")
    rig.ask("hold tank-4")
    (happened,) = await rig.run()
    assert planned(rig, "tank-4") == pytest.approx([max(30.0, before - 5.0 * step) for step in range(1, 21)])
    assert happened.verdicts[rig.place("tank-3")] is Verdict.ON_TIME


async def test_neighbours_plan_around_a_section_that_goes_blind_in_the_same_period(rig: Rig) -> None:
    """It is certain before the synthesis that tank 4 will not move: the plan has it standing still."""
    await rig.run(5)
    before = rig.told("tank-4")
    rig.plant.provoke("dropout tank-4.level")
    await rig.run()
    assert rig.verdict("tank-4") is Verdict.BLIND
    assert planned(rig, "tank-4") == pytest.approx([before] * 20)


async def test_neighbours_make_up_for_a_held_section(rig: Rig) -> None:
    """Tank 4 is held at 30 % and runs low; tanks 3 and 5 pump more, and stand a little high to feed it, nobody else."""
    await rig.run(5)
    before = np.array([rig.told(name) for name in rig.names])
    rig.ask("hold tank-4")
    await rig.run(160)
    after = np.array([rig.told(name) for name in rig.names])
    mean = rig.levels(40).mean(axis=0)
    assert mean[3] < 19.0
    assert (after - before)[[2, 4]].min() > 0.5
    assert ((mean[[2, 4]] > 20.1) & (mean[[2, 4]] < 21.0)).all()
    assert np.abs(mean[[0, 1, 5, 6, 7]] - 20.0).max() < OFFSET_SPANS * SPAN_CM


async def test_a_rearm_is_bumpless(rig: Rig) -> None:
    """The first inputs after a hold move no further than the rate limit from what the panel shows then."""
    await rig.run(5)
    rig.ask("hold tank-4")
    await rig.run(30)
    rig.ask("rearm tank-4")
    shown = rig.told("tank-4")
    await rig.run()
    assert rig.state("tank-4") is State.FROZEN
    assert rig.told("tank-4") == pytest.approx(shown)
    await rig.run()
    assert rig.state("tank-4") is State.DRIVING
    assert abs(rig.told("tank-4") - shown) <= 20.0 * 0.5 + 1e-9
    await rig.run(150)
    assert abs(rig.levels(40).mean(axis=0)[3] - 20.0) < OFFSET_SPANS * SPAN_CM


async def test_a_rearm_too_early_is_refused_with_the_reason(rig: Rig) -> None:
    """The table wants clean periods first, and says how many are missing."""
    await rig.run(5)
    rig.ask("hold tank-4")
    await rig.run()
    rig.ask("rearm tank-4")
    await rig.run()
    assert rig.answers[-1].state is RequestState.REFUSED
    assert "too few clean periods" in rig.answers[-1].reason
    assert "tank-4" in rig.answers[-1].reason
    assert rig.state("tank-4") is State.HOLDING


async def test_skipped_periods_count_as_misses(rig: Rig, tarn_row: PlantDesign) -> None:
    """Nobody drove in them: as many as latch put every section on hold in the first period that runs again."""
    await rig.run(5)
    rig.skip(tarn_row.plant.hold.latch_after)
    await rig.run()
    assert rig.states() == {State.HOLDING}


async def test_a_few_skipped_periods_are_forgiven(rig: Rig) -> None:
    """One clean period drives again, inside the rate limit; but the misses are remembered."""
    await rig.run(5)
    before = [rig.told(name) for name in rig.names]
    rig.skip(2)
    await rig.run()
    assert rig.states() == {State.DRIVING}
    assert np.abs(np.array(before) - [rig.told(name) for name in rig.names]).max() <= 10.0 + 1e-9
    assert {len(hold.misses) for hold in rig.standing.holds} == {2}


async def test_the_same_plant_and_seed_give_the_same_run(tarn_row: PlantDesign) -> None:
    """Bit for bit: inputs, estimates, passes."""
    runs = []
    for _ in range(2):
        rig = Rig(tarn_row)
        rig.plant.provoke("release tank-3.consumer")
        await rig.run(30)
        rig.plant.provoke("freeze tank-4.level")
        await rig.run(30)
        assert rig.standing.estimate is not None
        runs.append((rig, rig.standing.estimate.x.tobytes(), rig.standing.estimate.w.tobytes()))
    (one, *first), (other, *second) = runs
    assert first == second
    assert [sent.values for sent in one.link.sent] == [sent.values for sent in other.link.sent]


def planned(rig: Rig, section: str) -> list[float]:
    """What the last plan has a section's pump do over the horizon, engineering units."""
    plan = rig.history[-1].plan
    assert plan is not None
    k = [signal.section for signal in rig.design.inputs].index(section)
    rows = plan.rows[rig.design.synthesis.table.rows_of(f"{section}.pump")]
    return [float(v) for v in rows * rig.design.scaling.u_width[k] + rig.design.scaling.u_zero[k]]
