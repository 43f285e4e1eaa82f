"""From a plant file to its simulated twin: at rest where it should be, with everything the file says about it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.clock import NS, VirtualClock
from gateway.plantfile.plant import HoldAction, Plant, Role, SafeHold, SiteKind, SiteSpec
from gateway.simulated import identifiers_of, simulated_plant
from gateway.tags import tags_of as gateway_tags
from sim_plant import consumers
from sim_plant.direct import DirectPlant
from sim_plant.panel import KEEP, LocalAction
from sim_plant.plant import Network
from sim_plant.tags import tags_of
from tests.gateway.bench.rig import row_plant

TANK = {
    "area": 40e-4,
    "rim": 0.38,
    "outlet_bore": 6e-3,
    "discharge": 0.61,
    "pump_capacity": 70e-6,
    "pump_lag_s": 2.0,
    "pump_minimum": 0.08,
}
TUBE = {"bore": 3e-3, "length": 0.3}

SITE = SiteSpec(
    name="bench",
    kind=SiteKind.BENCH,
    link="opcua",
    endpoint="opc.tcp://127.0.0.1:4840",
    namespace="urn:lengthsman:test",
    address="{section}/{signal}",
    panel_address="panel/{signal}",
)


def tanks(count: int = 3) -> Plant:
    """Tanks of the demo plant's size."""
    plant = row_plant(count)
    return replace(
        plant,
        sections=tuple(replace(section, parameters=TANK) for section in plant.sections),
        couplings=tuple(replace(coupling, parameters=TUBE) for coupling in plant.couplings),
        sites={"bench": SITE},
    )


PLANT = tanks()


def changed(plant: Plant, role: Role, **changes: object) -> Plant:
    """The plant with every signal of a role changed."""
    return replace(
        plant,
        sections=tuple(
            replace(
                section,
                signals=tuple(
                    replace(signal, **changes) if signal.role is role else signal  # type: ignore[arg-type]
                    for signal in section.signals
                ),
            )
            for section in plant.sections
        ),
    )


def levels_cm(plant: Plant, away_spans: float) -> list[float]:
    """True levels at the start."""
    truth = DirectPlant(simulated_plant(plant, away_spans=away_spans), VirtualClock()).truth()
    return [truth[signal.tag] for signal in plant.signals(Role.MEASURED)]


def test_it_starts_at_its_targets() -> None:
    """Without an offset every level is at its target."""
    assert levels_cm(PLANT, 0.0) == pytest.approx([20.0, 20.0, 20.0], abs=1e-6)


@given(st.floats(-0.2, 0.2), st.integers(2, 6))
def test_it_rests_wherever_it_starts(away_spans: float, count: int) -> None:
    """The start is an equilibrium for the inputs it starts with: the derivative of every state is zero."""
    spec = simulated_plant(tanks(count), away_spans=away_spans)
    network = Network(spec.sections, spec.couplings)
    u = np.array([signal.rest / 100 for signal in spec.signals if signal.role == "driven"])
    slope = network.derivative(np.array(spec.x0), u, np.zeros(len(network.w_tags)))
    assert np.abs(slope / np.maximum(np.abs(spec.x0), 1e-9)).max() < 1e-8


@given(st.floats(0.0, 0.2), st.integers(2, 8))
def test_the_start_is_at_most_so_far_off(away_spans: float, count: int) -> None:
    """No level is farther from its target than the amplitude, and the mean of all is at the target."""
    off = np.array(levels_cm(tanks(count), away_spans)) - 20.0
    assert np.abs(off).max() <= 40.0 * away_spans + 1e-6
    assert off.mean() == pytest.approx(0.0, abs=1e-6)


def test_without_a_panel_it_stays_where_it_starts() -> None:
    """Nobody moves anything: after a minute the plant is where it was, off its targets."""
    clock = VirtualClock()
    plant = replace(changed(PLANT, Role.UNMEASURED_DISTURBANCE, profile=None), panel=None)
    plant = changed(plant, Role.MEASURED_DISTURBANCE, profile=None)
    direct = DirectPlant(simulated_plant(plant, away_spans=0.1), clock)
    before = dict(direct.truth())
    clock.advance_to(clock.monotonic_ns() + 60 * NS)
    assert dict(direct.truth()) == pytest.approx(before, rel=1e-6)


def test_a_start_the_plant_cannot_be_held_at_is_refused() -> None:
    """A level that wants more than the pump may give names the pump, the value and its limits."""
    tight = changed(PLANT, Role.DRIVEN, hard=(0.0, 40.0))
    with pytest.raises(ValueError, match=r"tank-1\.pump = 48\.\d+ % .* outside the hard limits \[0, 40\]"):
        simulated_plant(tight)


@pytest.mark.parametrize(
    ("hold", "local"),
    [
        (SafeHold(HoldAction.RAMP, 30.0, 10.0), LocalAction(30.0, 10.0)),
        (SafeHold(HoldAction.KEEP), KEEP),
        (SafeHold(HoldAction.HAND_BACK), KEEP),
        (None, KEEP),
    ],
)
def test_the_panel_acts_as_the_safe_hold_says(hold: SafeHold | None, local: LocalAction) -> None:
    """A ramp is the panel's own; anything else leaves the actuator where it is."""
    spec = simulated_plant(changed(PLANT, Role.DRIVEN, safe_hold=hold))
    assert {signal.local for signal in spec.signals if signal.role == "driven"} == {local}


def test_consumers_instruments_and_panel_are_those_of_the_file() -> None:
    """Profiles, noise, resolution, watchdog, window and seed go over unchanged."""
    spec = simulated_plant(PLANT)
    by_tag = {signal.tag: signal for signal in spec.signals}
    assert by_tag["tank-1.consumer"].profile == consumers.Profile(0.0, 8.0, 90.0, 45.0)
    assert by_tag["tank-2.consumer"].role == "measured_disturbance"
    assert by_tag["tank-1.level"].instrument.noise == 0.02
    assert (spec.watchdog_s, spec.window_s, spec.seed) == (2.0, 0.5, 1)


def test_a_fast_plant_is_scanned_several_times_a_period() -> None:
    """Twenty milliseconds of period: scanned every four, and never more slowly than every fifty."""
    assert simulated_plant(replace(PLANT, period_s=0.02)).step_s == pytest.approx(0.004)
    assert simulated_plant(replace(PLANT, period_s=10.0)).step_s == pytest.approx(0.05)


def test_every_tag_of_the_gateway_is_served_where_the_gateway_looks() -> None:
    """The addresses of the gateway's tags are identifiers of the plant's."""
    served = identifiers_of(tags_of(simulated_plant(PLANT)), SITE)
    assert {tag.name: tag.address for tag in gateway_tags(PLANT, SITE)}.items() <= served.items()


def test_overrides_and_formal_addresses_are_served_too() -> None:
    """An override holds for the plant as for the gateway; `ns=2;s=` is the site's own namespace."""
    site = replace(SITE, address="ns=2;s={section}.{signal}", overrides={"tank-1.level": "LT-101"})
    served = identifiers_of(tags_of(simulated_plant(PLANT)), site)
    assert (served["tank-1.level"], served["tank-2.level"]) == ("LT-101", "tank-2.level")


@pytest.mark.parametrize("address", ["i=77", "nsu=urn:elsewhere;s={section}.{signal}"])
def test_an_address_a_simulated_plant_cannot_serve_is_refused(address: str) -> None:
    """Only strings in the site's own namespace; the message names site, tag and address."""
    with pytest.raises(ValueError, match=r"site bench, tank-1\.level: the address .* cannot be simulated"):
        identifiers_of(tags_of(simulated_plant(PLANT)), replace(SITE, address=address))
