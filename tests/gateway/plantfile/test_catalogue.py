"""What the built-in physics offer to a plant file."""

import pytest

from gateway.plantfile import units
from gateway.plantfile.catalogue import PhysicsEntry, built_in
from gateway.plantfile.plant import Role
from sim_plant.physics import COUPLINGS, PHYSICS

ENTRIES = [*built_in().sections.values(), *built_in().couplings.values()]


def test_every_registered_physics_is_offered() -> None:
    """Under its name in the registry."""
    assert (set(built_in().sections), set(built_in().couplings)) == (set(PHYSICS), set(COUPLINGS))


@pytest.mark.parametrize("entry", ENTRIES, ids=lambda entry: entry.name)
def test_every_unit_a_physics_uses_is_understood(entry: PhysicsEntry) -> None:
    """Parameters and signals, so that no dimension check can fail for the physics' own sake."""
    for unit in [*(item.unit for item in entry.parameters.values()), *(slot.unit for slot in entry.slots.values())]:
        assert units.conversion(unit, unit).factor == 1.0


def test_a_time_is_written_without_its_suffix() -> None:
    """`pump_lag = "2 s"` in the file is `pump_lag_s` of the tank."""
    assert built_in().sections["tank"].parameters["pump_lag"].name == "pump_lag_s"


def test_signals_come_as_outputs_inputs_disturbances() -> None:
    """Each with the roles it can play."""
    slots = built_in().sections["tank"].slots
    assert {name: slot.roles for name, slot in slots.items()} == {
        "level": (Role.MEASURED,),
        "pump": (Role.DRIVEN,),
        "consumer": (Role.MEASURED_DISTURBANCE, Role.UNMEASURED_DISTURBANCE),
    }
    assert list(slots) == ["level", "pump", "consumer"]


@pytest.mark.parametrize("entry", ENTRIES, ids=lambda entry: entry.name)
def test_the_physics_judge_their_own_numbers(entry: PhysicsEntry) -> None:
    """Nonsense raises the error that the reader turns into a mistake."""
    with pytest.raises(ValueError, match="give"):
        entry.build(**{item.name: -1.0 for item in entry.parameters.values()})
