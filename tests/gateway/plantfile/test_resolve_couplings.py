"""Couplings along a row and between two."""

import pytest

from tests.gateway.plantfile.rig import GOOD, edited, mistakes_of, only_mistake, plant_of

ALONG = 'along = "oven-{1..3}"'


def test_a_row_is_coupled_each_to_the_next() -> None:
    """In its order, parameters in SI, defaults filled in."""
    couplings = plant_of(GOOD).couplings
    assert [(coupling.one, coupling.other) for coupling in couplings] == [("oven-1", "oven-2"), ("oven-2", "oven-3")]
    assert [coupling.parameters for coupling in couplings] == [{"conductance": 4.0, "area": 1.0}] * 2


def test_two_sections_are_coupled() -> None:
    """Any two."""
    (coupling,) = plant_of(edited(ALONG, 'between = ["oven-1", "oven-3"]')).couplings
    assert (coupling.one, coupling.other, coupling.kind) == ("oven-1", "oven-3", "wall")


def test_a_plant_may_have_no_couplings() -> None:
    """One section is a plant."""
    text = GOOD[: GOOD.index("[[couplings]]")] + GOOD[GOOD.index("[sites.bench]") :]
    assert plant_of(text).couplings == ()


@pytest.mark.parametrize(
    ("old", "new", "place"),
    [
        (ALONG, 'along = "oven-{1..4}"', "couplings[1].along"),
        (ALONG, 'along = "oven-1"', "couplings[1].along"),
        (ALONG, 'along = "oven-{1,1}"', "couplings[1].along"),
        (ALONG, 'between = ["oven-1", "ofen-2"]', "couplings[1].between"),
        (ALONG, 'between = ["oven-2", "oven-2"]', "couplings[1].between"),
        (ALONG, f'{ALONG}\nbetween = ["oven-1", "oven-2"]', "couplings[1].between"),
        ('kind = "wall"', 'kind = "walls"', "couplings[1].kind"),
        ('conductance = "4 W/K"', 'conductance = "4 W"', "couplings[1].conductance"),
    ],
)
def test_a_wrong_coupling_is_named(old: str, new: str, place: str) -> None:
    """Unknown sections, too few, one with itself, both forms, unknown kind, wrong dimension."""
    assert only_mistake(edited(old, new)).place == place


def test_an_unknown_section_brings_the_nearest() -> None:
    """One letter off."""
    assert only_mistake(edited(ALONG, 'between = ["oven-1", "ofen-2"]')).suggestion == "oven-2"


def test_a_row_far_too_long_is_not_said_for_every_name() -> None:
    """Three names and a count."""
    text = edited(ALONG, 'along = "oven-{1..90}"')
    assert [mistake.read for mistake in mistakes_of(text)] == ['"oven-4"', '"oven-5"', '"oven-6"', '"84 more names"']


def test_sections_whose_names_are_broken_are_not_called_unknown() -> None:
    """One slip, one mistake."""
    assert only_mistake(edited('names = "oven-{1..3}"', 'names = "oven-{1..3"')).place == "sections[1].names"
