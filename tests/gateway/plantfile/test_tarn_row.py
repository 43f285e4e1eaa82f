"""The plant file of Tarn Row resolves to the plant of that name."""

from itertools import pairwise
from pathlib import Path

import pytest

import gateway
from gateway.plantfile import PlantFileError, read_plant, read_plant_text, warnings_of
from gateway.plantfile.plant import (
    BenchSpec,
    ControllerSpec,
    Cutoffs,
    HoldAction,
    HoldSpec,
    Instrument,
    PanelSpec,
    Plant,
    Profile,
    Role,
    SafeHold,
    Scale,
    SiteKind,
)

FILE = Path(gateway.__file__).parents[1] / "deploy" / "tarn-row.toml"
TANKS = [f"tank-{number}" for number in range(1, 9)]


@pytest.fixture(scope="module")
def plant() -> Plant:
    """The plant of the file, read once: it is frozen."""
    return read_plant(FILE)


def test_it_fits_on_two_screens() -> None:
    """A newcomer reads it whole."""
    lines = FILE.read_text(encoding="utf-8").splitlines()
    assert len(lines) <= 120
    assert max(map(len, lines)) <= 120


def test_it_is_eight_tanks_in_a_row(plant: Plant) -> None:
    """In the order of the row, each coupled to the next by a tube."""
    assert (plant.name, plant.period_s) == ("Tarn Row", 0.5)
    assert [section.name for section in plant.sections] == TANKS
    assert [(coupling.one, coupling.other) for coupling in plant.couplings] == list(pairwise(TANKS))


def test_its_tanks_have_the_sizes_of_the_rig(plant: Plant) -> None:
    """40 cm2, rim at 38 cm, outlet 6 mm at 0.61, pump 70 cm3/s with 2 s lag and 8 % minimum, in SI."""
    sizes = {
        "area": 0.004,
        "rim": 0.38,
        "outlet_bore": 0.006,
        "discharge": 0.61,
        "pump_capacity": 70e-6,
        "pump_lag_s": 2.0,
        "pump_minimum": 0.08,
    }
    for section in plant.sections:
        assert {name: section.parameters[name] for name in sizes} == pytest.approx(sizes, rel=1e-12)


def test_its_tubes_have_the_sizes_of_the_rig(plant: Plant) -> None:
    """3 mm by 300 mm, of water."""
    for coupling in plant.couplings:
        sizes = {name: coupling.parameters[name] for name in ("bore", "length", "density", "viscosity")}
        assert sizes == pytest.approx({"bore": 0.003, "length": 0.3, "density": 998.2, "viscosity": 1.002e-3})


def test_its_levels(plant: Plant) -> None:
    """One measured level per tank."""
    levels = plant.signals(Role.MEASURED)
    assert [level.tag for level in levels] == [f"{tank}.level" for tank in TANKS]
    for level in levels:
        assert (level.unit, level.scale) == ("cm", Scale(0.01))
        assert (level.span, level.soft, level.target, level.price) == ((0.0, 40.0), (4.0, 36.0), 20.0, 1.0)
        assert (level.instrument, level.noise, level.jump_per_s) == (Instrument(0.02, 0.001), 0.02, 4.0)


def test_its_pumps(plant: Plant) -> None:
    """One driven pump per tank."""
    pumps = plant.signals(Role.DRIVEN)
    assert [pump.tag for pump in pumps] == [f"{tank}.pump" for tank in TANKS]
    for pump in pumps:
        assert (pump.unit, pump.scale, pump.hard) == ("%", Scale(0.01), (0.0, 100.0))
        assert (pump.rate_per_s, pump.move_price) == (20.0, 0.3)
        assert pump.safe_hold == SafeHold(HoldAction.RAMP, 30.0, 10.0)


def test_its_consumers(plant: Plant) -> None:
    """Tanks 3 and 6 unmeasured, tank 5 measured, in cm3/s."""
    unmeasured, measured = plant.signals(Role.UNMEASURED_DISTURBANCE), plant.signals(Role.MEASURED_DISTURBANCE)
    assert [consumer.tag for consumer in unmeasured] == ["tank-3.consumer", "tank-6.consumer"]
    assert [consumer.tag for consumer in measured] == ["tank-5.consumer"]
    for consumer in (*unmeasured, *measured):
        assert (consumer.scale.factor, type(consumer.profile)) == (1e-6, Profile)


def test_its_settings(plant: Plant) -> None:
    """Controller, cut-offs, hold, panel and bench."""
    assert plant.controller == ControllerSpec(horizon=20, locality=2)
    assert (plant.cutoffs, plant.hold) == (Cutoffs(), HoldSpec(latch_after=4, blind_after=1))
    assert (plant.panel, plant.bench) == (PanelSpec(2.0, 0.5), BenchSpec(1, 0.05))


def test_its_bench(plant: Plant) -> None:
    """On loopback, by section and signal."""
    bench = plant.sites["bench"]
    assert (bench.kind, bench.link, bench.endpoint) == (SiteKind.BENCH, "opcua", "opc.tcp://127.0.0.1:4840")
    assert (bench.namespace, bench.address_of("tank-3", "level")) == ("urn:lengthsman:tarn-row", "tank-3/level")
    assert bench.panel_address_of("heartbeat") == "panel/heartbeat"


def test_its_live_site(plant: Plant) -> None:
    """An example, with one address of its own, and insecure out loud."""
    live = plant.sites["live"]
    assert (live.kind, live.insecure) == (SiteKind.LIVE, True)
    assert live.address_of("tank-3", "level") == "TR.LT-103.PV"
    assert live.address_of("tank-4", "level") == "TR.tank-4.level"


def test_its_only_warning_is_the_insecure_example(plant: Plant) -> None:
    """Everything else is as it should be."""
    assert warnings_of(plant) == ["site live: insecure, so anybody on its network can write to the plant"]


@pytest.mark.parametrize(
    ("old", "new", "place", "suggestion"),
    [
        ("outlet_bore   =", "outlet_boar   =", "kinds.tank.outlet_boar", "outlet_bore"),
        ('area          = "40 cm^2"', 'area          = "40 cm"', "kinds.tank.area", None),
        ('rim           = "38 cm"', 'rim           = "0 cm"', "kinds.tank.rim", None),
        ('pump_minimum  = "8 %"', 'pump_minimum  = "108 %"', "kinds.tank.pump_minimum", None),
        ('bore   = "3 mm"', 'bore   = "-3 mm"', "couplings[1].bore", None),
        ("signals.pump", "signals.pmup", "kinds.tank.signals.pmup", "pump"),
    ],
)
def test_a_slip_in_it_is_named(old: str, new: str, place: str, suggestion: str | None) -> None:
    """With the real physics: unknown parameter, dimension, what tank and tube refuse, unknown signal."""
    text = FILE.read_text(encoding="utf-8")
    assert old in text
    with pytest.raises(PlantFileError) as caught:
        read_plant_text(text.replace(old, new, 1), "tarn-row.toml")
    (mistake,) = caught.value.mistakes
    assert (mistake.place, mistake.suggestion) == (place, suggestion)
    assert mistake.line is not None
    assert new.splitlines()[0] in text.replace(old, new, 1).splitlines()[mistake.line - 1]
