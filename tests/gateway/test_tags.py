"""Tests of `gateway.tags`: what a site's link carries, where it leads, and what of it may be written."""

from __future__ import annotations

from dataclasses import replace

import pytest

from gateway.design import PlantDesign
from gateway.plantfile.plant import Role
from gateway.signals import DataType, Tag
from gateway.tags import in_charge_tag, panel_tag, tags_of


@pytest.fixture
def bench(tarn_row: PlantDesign) -> dict[str, Tag]:
    """Tarn Row's tags on its bench, by name."""
    return {tag.name: tag for tag in tags_of(tarn_row.plant, tarn_row.plant.sites["bench"])}


def test_every_name_stands_once(tarn_row: PlantDesign) -> None:
    """Readings and outcomes are looked up by name."""
    for site in tarn_row.plant.sites.values():
        names = [tag.name for tag in tags_of(tarn_row.plant, site)]
        assert len(names) == len(set(names))


def test_measured_signals_are_carried(tarn_row: PlantDesign, bench: dict[str, Tag]) -> None:
    """Levels and the measured consumer, at the site's addresses."""
    for role in (Role.MEASURED, Role.MEASURED_DISTURBANCE):
        for signal in tarn_row.plant.signals(role):
            assert bench[signal.tag] == Tag(signal.tag, f"{signal.section}/{signal.name}")


def test_what_nobody_measures_is_not_asked_for(bench: dict[str, Tag]) -> None:
    """Tank 3's consumer is known to the simulated plant alone."""
    assert "tank-3.consumer" not in bench
    assert "tank-5.consumer" in bench


def test_only_inputs_bits_and_what_control_tells_the_panel_are_writable(bench: dict[str, Tag]) -> None:
    """A link refuses to write anything else, so this list is the whole reach of control."""
    sections = [f"tank-{number}" for number in range(1, 9)]
    assert {name for name, tag in bench.items() if tag.writable} == {
        *(f"{section}.pump" for section in sections),
        *(f"{section}.in_charge" for section in sections),
        "panel.heartbeat",
        "panel.expires",
        "panel.period",
    }


@pytest.mark.parametrize(
    ("name", "kind"),
    [
        ("tank-3.pump", DataType.FLOAT),
        ("tank-3.in_charge", DataType.BOOLEAN),
        ("panel.permit", DataType.BOOLEAN),
        ("panel.tripped", DataType.BOOLEAN),
        ("panel.clock", DataType.COUNTER),
        ("panel.accepted", DataType.COUNTER),
        ("panel.heartbeat", DataType.COUNTER),
        ("panel.expires", DataType.COUNTER),
        ("panel.period", DataType.COUNTER),
        ("panel.refusal", DataType.TEXT),
    ],
)
def test_every_tag_has_its_type(bench: dict[str, Tag], name: str, kind: DataType) -> None:
    """The panel takes a counter for a counter and nothing else."""
    assert bench[name].data_type is kind


def test_a_plant_without_a_panel_has_none_of_its_tags(tarn_row: PlantDesign) -> None:
    """Signals alone are left."""
    plant = replace(tarn_row.plant, panel=None)
    names = [tag.name for tag in tags_of(plant, plant.sites["bench"])]
    assert len(names) == 8 + 1 + 8
    assert not any(name.startswith("panel.") or name.endswith(".in_charge") for name in names)


def test_a_site_may_put_single_signals_elsewhere(tarn_row: PlantDesign) -> None:
    """The override stands, the others follow the pattern, the panel's own pattern too."""
    live = {tag.name: tag.address for tag in tags_of(tarn_row.plant, tarn_row.plant.sites["live"])}
    assert live["tank-3.level"] == "TR.LT-103.PV"
    assert live["tank-4.level"] == "TR.tank-4.level"
    assert live["panel.permit"] == "TR.Panel.permit"


def test_names_are_made_in_one_place() -> None:
    """What rooms look up is what a site's link carries."""
    assert in_charge_tag("tank-3") == "tank-3.in_charge"
    assert panel_tag("clock") == "panel.clock"
