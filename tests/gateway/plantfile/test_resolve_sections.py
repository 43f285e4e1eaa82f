"""Kinds and sections: names, what a section adds to its kind, parameters."""

import pytest

from gateway.plantfile.plant import Role
from tests.gateway.plantfile.rig import GOOD, edited, mistakes_of, only_mistake, plant_of

SPLIT = edited(
    'names = "oven-{1..3}"\nkind = "oven"\n',
    """\
names = "oven-{1,3}"
kind = "oven"

[[sections]]
names = "oven-2"
kind = "oven"
loss = "7 W/K"
[sections.signals.ware]
role = "measured_disturbance"
unit = "W"
span = [0, 500]
[sections.signals.temperature]
target = 150
""",
)


def test_names_are_unrolled() -> None:
    """One section for each, in order."""
    assert [section.name for section in plant_of(GOOD).sections] == ["oven-1", "oven-2", "oven-3"]


def test_a_row_split_over_tables_stays_a_row() -> None:
    """In the order of its numbers."""
    assert [section.name for section in plant_of(SPLIT).sections] == ["oven-1", "oven-2", "oven-3"]


def test_a_section_adds_signals_to_its_kind() -> None:
    """Only there."""
    tags = [signal.tag for signal in plant_of(SPLIT).signals(Role.MEASURED_DISTURBANCE)]
    assert tags == ["oven-2.ware"]


def test_a_section_replaces_single_keys_of_its_kind_s_signals() -> None:
    """The other keys stay, and so do other sections."""
    one, two, _ = plant_of(SPLIT).signals(Role.MEASURED)
    assert (one.target, two.target, two.soft) == (200.0, 150.0, (50.0, 350.0))


def test_a_section_replaces_single_parameters_of_its_kind() -> None:
    """In SI units, by the names of the physics, defaults filled in."""
    plant = plant_of(SPLIT)
    expected = {"heat_capacity": 2000.0, "loss": 5.0, "lag_s": 3.0, "emissivity": 0.9}
    assert plant.section("oven-1").parameters == expected
    assert plant.section("oven-2").parameters == expected | {"loss": 7.0}


def test_signals_stand_in_the_order_of_their_physics() -> None:
    """Whatever order the file has: outputs, inputs, disturbances."""
    assert [signal.name for signal in plant_of(SPLIT).section("oven-2").signals] == ["temperature", "heater", "ware"]


def test_what_a_section_replaces_is_blamed_on_the_section() -> None:
    """The line that made the mistake, not the kind's."""
    mistake = only_mistake(edited("target = 150", "target = 500", SPLIT))
    assert mistake.place == "sections[2].signals.temperature.target"


def test_a_kind_s_mistake_is_said_once() -> None:
    """Not once for each section of it."""
    assert only_mistake(edited("span = [0, 400]", "span = [400, 0]")).place == "kinds.oven.signals.temperature.span"


def test_a_kind_nobody_uses_is_checked_too() -> None:
    """It may be used tomorrow."""
    text = edited("[[sections]]", '[kinds.spare]\nphysics = "zone"\nloss = "1 W/K"\nlag = "1 s"\n[[sections]]')
    assert only_mistake(text).place == "kinds.spare.heat_capacity"


@pytest.mark.parametrize("names", ["oven-{1..3}", "oven-{3..5}", "oven-2"])
def test_a_name_twice_is_refused(names: str) -> None:
    """Over two tables."""
    text = edited("[[couplings]]", f'[[sections]]\nnames = "{names}"\nkind = "oven"\n[[couplings]]')
    mistakes = mistakes_of(text)
    assert {mistake.place for mistake in mistakes} == {"sections[2].names"}
    assert {mistake.read for mistake in mistakes} <= {'"oven-1"', '"oven-2"', '"oven-3"'}


def test_a_name_twice_in_one_pattern_is_refused() -> None:
    """In one table as well."""
    assert only_mistake(edited('names = "oven-{1..3}"', 'names = "oven-{1..3,2}"')).read == '"oven-2"'


def test_a_section_can_t_be_called_panel() -> None:
    """Its tags would be the panel's."""
    text = edited("[[couplings]]", '[[sections]]\nnames = "panel"\nkind = "oven"\n[[couplings]]')
    assert only_mistake(text).read == '"panel"'


def test_an_unknown_kind_brings_the_nearest() -> None:
    """Of those of the file; its names are still known to the couplings."""
    mistake = only_mistake(edited('kind = "oven"', 'kind = "ovn"'))
    assert (mistake.place, mistake.suggestion) == ("sections[1].kind", "oven")


def test_an_unknown_physics_brings_the_nearest() -> None:
    """Of those there are."""
    mistake = only_mistake(edited('physics = "zone"', 'physics = "zones"'))
    assert (mistake.place, mistake.suggestion) == ("kinds.oven.physics", "zone")


def test_signals_are_checked_even_without_a_physics() -> None:
    """A misspelled physics hides nothing else."""
    text = edited("span = [0, 400]", "span = [400, 0]", edited('physics = "zone"', 'physics = "zones"'))
    assert [mistake.place for mistake in mistakes_of(text)] == [
        "kinds.oven.physics",
        "kinds.oven.signals.temperature.span",
    ]


@pytest.mark.parametrize(
    ("old", "new", "key"),
    [
        ('loss = "5 W/K"', 'loss = "5 W"', "loss"),
        ('loss = "5 W/K"', "loss = 5", "loss"),
        ('loss = "5 W/K"', 'loss = "5"', "loss"),
        ('loss = "5 W/K"', "loss = true", "loss"),
        ('loss = "5 W/K"', "loss = nan", "loss"),
        ('loss = "5 W/K"', "loss = { to = 5 }", "loss"),
        ('lag = "3 s"', 'lag = "3 kg"', "lag"),
        ('lag = "3 s"', 'lag = "3 s"\nemissivity = "3 cm"', "emissivity"),
        ('lag = "3 s"', 'lag = "3 s"\nemissivity = nan', "emissivity"),
        ('lag = "3 s"', 'lag = "3 s"\ncolour = "red"', "colour"),
        ('heat_capacity = "2 kJ/K"', 'heat_capacity = "-2 kJ/K"', "heat_capacity"),
    ],
)
def test_a_wrong_parameter_is_named(old: str, new: str, key: str) -> None:
    """Wrong dimension, bare number for one with a unit, wrong type, unknown; and what the physics itself refuses."""
    assert only_mistake(edited(old, new)).place == f"kinds.oven.{key}"


@pytest.mark.parametrize(("written", "value"), [("0.5", 0.5), ('"50 %"', 0.5), ("1", 1.0)])
def test_a_plain_number_may_be_bare_or_a_percentage(written: str, value: float) -> None:
    """Only where the physics wants a number without a unit."""
    plant = plant_of(edited('lag = "3 s"', f'lag = "3 s"\nemissivity = {written}'))
    assert plant.sections[0].parameters["emissivity"] == value


def test_sections_share_no_state() -> None:
    """Each has its own parameters, so that nobody changes one through another."""
    one, two, _ = plant_of(GOOD).sections
    assert one.parameters == two.parameters
    assert one.parameters is not two.parameters


def test_an_input_that_nobody_drives_is_a_mistake() -> None:
    """It is named once, with the physics that has it."""
    text = GOOD[: GOOD.index("[kinds.oven.signals.heater]")] + GOOD[GOOD.index("[[sections]]") :]
    mistake = only_mistake(text)
    assert mistake.place == "kinds.oven.signals.heater"
    assert "a driven signal" in mistake.allowed
