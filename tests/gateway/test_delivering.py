"""Tests of `gateway.delivering`: one set out, and what its outcomes say of every section."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from gateway.delivering import Delivery, OutgoingSet, compose_set
from gateway.design import PlantDesign
from gateway.inputs import ABANDONED, HANDED_BACK, LEFT_ALONE, Outgoing
from gateway.links.protocol import WriteOutcome
from gateway.panel_view import PanelView
from gateway.tags import tags_of

K, BEAT, CLOCK_MS = 77, 5, 1000
WRITTEN, REJECTED, UNKNOWN, NOT_SENT = (
    WriteOutcome.WRITTEN,
    WriteOutcome.REJECTED,
    WriteOutcome.UNKNOWN,
    WriteOutcome.NOT_SENT,
)


def view(*, clock_ms: int | None = CLOCK_MS, ours: bool = True) -> PanelView:
    """A panel that has everything, or nothing, in our charge."""
    return PanelView(True, clock_ms, 1, "", False, (ours,) * 8, (48.0,) * 8)


def parts(**told: Outgoing) -> list[Outgoing]:
    """What each section is told: `tank_4=...`, the others nothing."""
    return [told.get(f"tank_{number}", LEFT_ALONE) for number in range(1, 9)]


def inputs(number: int, value: float, *, take: bool = False) -> Outgoing:
    """Inputs of one tank."""
    return Outgoing({f"tank-{number}.pump": value}, take=take)


def composed(design: PlantDesign, told: list[Outgoing], panel: PanelView) -> OutgoingSet:
    """The set as it goes out."""
    tags = {tag.name: tag for tag in tags_of(design.plant, design.plant.sites["bench"])}
    return compose_set(design, tags, told, panel, K, BEAT)


def named(outgoing: OutgoingSet) -> list[tuple[str, float]]:
    """Its values by name, in their order."""
    return [(tag.name, value) for tag, value in outgoing.values]


def delivered(
    design: PlantDesign,
    told: list[Outgoing],
    panel: PanelView | None = None,
    otherwise: WriteOutcome = WRITTEN,
    **outcomes: WriteOutcome,
) -> Delivery:
    """The delivery of a set when these tags (`tank_4_pump`, `panel_period`) are answered differently."""
    panel = panel or view()
    outgoing = composed(design, told, panel)
    by_tag = {tag.name: otherwise for tag, _ in outgoing.values}
    for name, outcome in outcomes.items():
        tag = name.replace("panel_", "panel.").replace("_in_charge", ".in_charge").replace("_pump", ".pump")
        assert tag.replace("tank_", "tank-") in by_tag
        by_tag[tag.replace("tank_", "tank-")] = outcome
    return Delivery.of(design, told, outgoing, by_tag, panel, K)


def only(place: int) -> list[bool]:
    """True for one section alone."""
    return [i == place for i in range(8)]


# Composing ------------------------------------------------------------------------------------------------------------


def test_charge_inputs_expiry_counter_heartbeat(tarn_row: PlantDesign) -> None:
    """In this order, whatever the order of the sections that want something."""
    told = parts(tank_2=HANDED_BACK, tank_4=inputs(4, 50.0, take=True), tank_6=inputs(6, 40.0))
    outgoing = composed(tarn_row, told, view())
    assert named(outgoing) == [
        ("tank-2.in_charge", False),
        ("tank-4.in_charge", True),
        ("tank-4.pump", 50.0),
        ("tank-6.pump", 40.0),
        ("panel.expires", CLOCK_MS + 500),
        ("panel.period", K),
        ("panel.heartbeat", BEAT),
    ]
    assert outgoing.sends.tolist() == [i in (3, 5) for i in range(8)]


def test_without_inputs_the_heartbeat_goes_alone(tarn_row: PlantDesign) -> None:
    """A counter that commits nothing would only count."""
    assert named(composed(tarn_row, parts(), view())) == [("panel.heartbeat", BEAT)]


def test_without_a_panel_clock_no_input_goes_out(tarn_row: PlantDesign) -> None:
    """Nobody could say how long it is valid; and a section is not taken without inputs."""
    told = parts(tank_4=inputs(4, 50.0, take=True))
    outgoing = composed(tarn_row, told, view(clock_ms=None))
    assert named(outgoing) == [("panel.heartbeat", BEAT)]
    assert not outgoing.sends.any()


def test_an_abandoned_section_silences_the_heartbeat(tarn_row: PlantDesign) -> None:
    """The panel's watchdog shall find out that nobody drives it."""
    assert named(composed(tarn_row, parts(tank_4=ABANDONED), view())) == []


def test_a_plant_without_a_panel_gets_inputs_alone(tarn_row: PlantDesign) -> None:
    """No charge, no counters, no heartbeat."""
    alone = replace(tarn_row, plant=replace(tarn_row.plant, panel=None))
    told = parts(tank_4=inputs(4, 50.0), tank_5=HANDED_BACK)
    assert named(composed(alone, told, view())) == [("tank-4.pump", 50.0)]


# Delivering -----------------------------------------------------------------------------------------------------------


def test_what_was_acknowledged_is_written(tarn_row: PlantDesign) -> None:
    """Its value is known, nothing is lost, the set is to be confirmed by its counter."""
    delivery = delivered(tarn_row, parts(tank_4=inputs(4, 50.0)))
    assert not delivery.lost.any()
    assert delivery.written[3] == 50.0
    assert np.isnan(np.delete(delivery.written, 3)).all()
    assert delivery.sent is not None
    assert (delivery.sent.k, delivery.sent.sections.tolist()) == (K, only(3))
    assert not delivery.sent.refused.any()
    assert not delivery.doubtful.any()


def test_a_rejected_input_is_lost_for_its_section_alone(tarn_row: PlantDesign) -> None:
    """And refused in so many words."""
    told = parts(tank_4=inputs(4, 50.0), tank_5=inputs(5, 50.0))
    delivery = delivered(tarn_row, told, tank_4_pump=REJECTED)
    assert delivery.lost.tolist() == only(3)
    assert np.isnan(delivery.written[3])
    assert delivery.written[4] == 50.0
    assert delivery.sent is not None
    assert delivery.sent.refused.tolist() == only(3)
    assert not delivery.doubtful.any()


@pytest.mark.parametrize("commit", ["panel_period", "panel_expires"])
def test_a_set_that_was_not_committed_is_lost_for_everybody_in_it(tarn_row: PlantDesign, commit: str) -> None:
    """Whatever the single inputs' answers say."""
    told = parts(tank_4=inputs(4, 50.0), tank_5=inputs(5, 50.0))
    delivery = delivered(tarn_row, told, view(), WRITTEN, **{commit: REJECTED})
    assert delivery.lost.tolist() == [i in (3, 4) for i in range(8)]
    assert delivery.sent is not None
    assert (delivery.sent.refused == delivery.lost).all()


@pytest.mark.parametrize("silent", ["tank_4_pump", "panel_period", "panel_expires"])
def test_silence_is_no_refusal(tarn_row: PlantDesign, silent: str) -> None:
    """Lost now, perhaps in force: open until the counter is read back, and the input unknown until it is read."""
    delivery = delivered(tarn_row, parts(tank_4=inputs(4, 50.0)), view(), WRITTEN, **{silent: UNKNOWN})
    assert delivery.lost.tolist() == only(3)
    assert delivery.doubtful.tolist() == only(3)
    assert delivery.unknown == (silent.replace("panel_", "panel.").replace("tank_4_pump", "tank-4.pump"),)
    assert delivery.sent is not None
    assert not delivery.sent.refused.any()


def test_what_never_left_needs_no_confirmation(tarn_row: PlantDesign) -> None:
    """Lost, and over: no counter went out that the panel could show."""
    delivery = delivered(tarn_row, parts(tank_4=inputs(4, 50.0)), otherwise=NOT_SENT)
    assert delivery.lost.tolist() == only(3)
    assert not delivery.doubtful.any()
    assert delivery.sent is None


def test_inputs_that_could_not_be_sent_are_lost(tarn_row: PlantDesign) -> None:
    """Without a clock of the panel."""
    delivery = delivered(tarn_row, parts(tank_4=inputs(4, 50.0)), view(clock_ms=None))
    assert delivery.lost.tolist() == only(3)
    assert delivery.sent is None


def test_who_has_nothing_to_say_loses_nothing(tarn_row: PlantDesign) -> None:
    """Not even when the heartbeat is not answered."""
    delivery = delivered(tarn_row, parts(), otherwise=UNKNOWN)
    assert not delivery.lost.any()
    assert delivery.sent is None
    assert delivery.unknown == ("panel.heartbeat",)


def test_a_section_taken_is_expected_in_our_charge(tarn_row: PlantDesign) -> None:
    """Once its bit was acknowledged; with less than that nobody would be surprised to miss it."""
    told = parts(tank_4=inputs(4, 50.0, take=True))
    panel = view(ours=False)
    assert delivered(tarn_row, told, panel).charge_expected.tolist() == only(3)
    for outcome in (REJECTED, UNKNOWN):
        assert not delivered(tarn_row, told, panel, tank_4_in_charge=outcome).charge_expected.any()


def test_a_section_handed_back_is_expected_until_that_was_acknowledged(tarn_row: PlantDesign) -> None:
    """So that it is handed back again if need be."""
    told = parts(tank_4=HANDED_BACK)
    assert delivered(tarn_row, told).charge_expected.tolist() == [i != 3 for i in range(8)]
    assert delivered(tarn_row, told, tank_4_in_charge=UNKNOWN).charge_expected.all()


def test_an_abandoned_section_is_not_expected(tarn_row: PlantDesign) -> None:
    """It never was ours."""
    assert delivered(tarn_row, parts(tank_4=ABANDONED)).charge_expected.tolist() == [i != 3 for i in range(8)]


def test_without_a_panel_an_answered_input_is_enough(tarn_row: PlantDesign) -> None:
    """There is nothing to commit it."""
    alone = replace(tarn_row, plant=replace(tarn_row.plant, panel=None))
    delivery = delivered(alone, parts(tank_4=inputs(4, 50.0)))
    assert not delivery.lost.any()
    assert delivery.written[3] == 50.0
