"""A small plant of invented physics, so that these tests also show that the reader knows no tank by itself.

Three heated zones in a row. GOOD is right; `edited` makes one slip in it at a time.
"""

from gateway.plantfile.catalogue import Catalogue, ParameterEntry, PhysicsEntry, Slot
from gateway.plantfile.mistakes import Mistake, PlantFileError
from gateway.plantfile.plant import Plant, Role
from gateway.plantfile.read import read_plant_text


def _zone(heat_capacity: float, loss: float, lag_s: float, emissivity: float = 0.9) -> object:
    if heat_capacity <= 0:
        raise ValueError(f"heat_capacity must be above 0, got {heat_capacity:g}")
    return (heat_capacity, loss, lag_s, emissivity)


def _wall(conductance: float, area: float = 1.0) -> object:
    return (conductance, area)


CATALOGUE = Catalogue(
    sections={
        "zone": PhysicsEntry(
            name="zone",
            parameters={
                "heat_capacity": ParameterEntry("heat_capacity", "J/K", None, "heat stored per kelvin"),
                "loss": ParameterEntry("loss", "W/K", None, "heat lost per kelvin"),
                "lag": ParameterEntry("lag_s", "s", None, "time constant of the heater"),
                "emissivity": ParameterEntry("emissivity", "", 0.9, "emissivity of the wall"),
            },
            build=_zone,
            slots={
                "temperature": Slot("K", (Role.MEASURED,)),
                "heater": Slot("1", (Role.DRIVEN,)),
                "ware": Slot("W", (Role.MEASURED_DISTURBANCE, Role.UNMEASURED_DISTURBANCE)),
            },
        )
    },
    couplings={
        "wall": PhysicsEntry(
            name="wall",
            parameters={
                "conductance": ParameterEntry("conductance", "W/K", None, "heat flow per kelvin"),
                "area": ParameterEntry("area", "m^2", 1.0, "area of the wall"),
            },
            build=_wall,
        )
    },
)

GOOD = """\
[plant]
name = "Rig"
period = "500 ms"

[controller]
horizon = 10
locality = 1

[panel]
watchdog = "2 s"
window = "500 ms"

[kinds.oven]
physics = "zone"
heat_capacity = "2 kJ/K"
loss = "5 W/K"
lag = "3 s"

[kinds.oven.signals.temperature]
role = "measured"
unit = "degC"
span = [0, 400]
soft = [50, 350]
target = 200
price = 1

[kinds.oven.signals.heater]
role = "driven"
unit = "%"
span = [0, 100]
hard = [0, 90]
rate = "20 %/s"
safe_hold = "keep"

[[sections]]
names = "oven-{1..3}"
kind = "oven"

[[couplings]]
along = "oven-{1..3}"
kind = "wall"
conductance = "4 W/K"

[sites.bench]
link = "opcua"
endpoint = "opc.tcp://127.0.0.1:4840"
namespace = "urn:example:rig"
address = "{section}/{signal}"
"""


def edited(old: str, new: str, text: str = GOOD) -> str:
    """Return the text with its first `old` replaced; fails when there is none."""
    assert old in text, f"{old!r} is not in the text"
    return text.replace(old, new, 1)


def plant_of(text: str) -> Plant:
    """Read a text with the rig's physics."""
    return read_plant_text(text, "rig.toml", CATALOGUE)


def mistakes_of(text: str) -> tuple[Mistake, ...]:
    """Return all mistakes of a text, none when it is right."""
    try:
        plant_of(text)
    except PlantFileError as error:
        return error.mistakes
    return ()


def only_mistake(text: str) -> Mistake:
    """Return the one mistake of a text."""
    mistakes = mistakes_of(text)
    assert len(mistakes) == 1, "\n".join(map(str, mistakes)) or "no mistake"
    return mistakes[0]
