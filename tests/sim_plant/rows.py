"""A short row of tanks for the tests, at rest at 20 cm.

Tank 2 has a consumer nobody measures, tank 3 a measured one.
"""

from __future__ import annotations

from dataclasses import replace
from math import pi, sqrt
from typing import Any

from sim_plant.consumers import Profile
from sim_plant.instruments import Instrument
from sim_plant.panel import LocalAction
from sim_plant.physics import Tank, Tube
from sim_plant.spec import Role, Scale, SimulatedPlantSpec, SimulatedSignal

TANK = Tank(area=40e-4, rim=0.38, outlet_bore=6e-3, discharge=0.61, pump_capacity=70e-6, pump_lag_s=2.0)
LEVEL_M = 0.20
OUTFLOW_M3_S = 0.61 * pi / 4 * 6e-3**2 * sqrt(2 * 9.81 * LEVEL_M)
REST_PERCENT = 100.0 * OUTFLOW_M3_S / 70e-6
QUIET = Instrument()
TRANSMITTER = Instrument(noise=0.02, resolution=0.01, lag_s=0.4)
RAMP = LocalAction(to=0.0, rate_per_s=10.0)
PROFILE = Profile(low=0.0, high=8.0, mean_low_s=30.0, mean_high_s=20.0)


def tank_signals(section: str, instrument: Instrument) -> tuple[SimulatedSignal, ...]:
    """Level and pump of one tank."""
    centi = Scale(factor=0.01)
    return (
        SimulatedSignal(section, "level", Role.MEASURED, "cm", (0.0, 40.0), centi, instrument=instrument),
        SimulatedSignal(section, "pump", Role.DRIVEN, "%", (0.0, 100.0), centi, rest=REST_PERCENT, local=RAMP),
    )


def consumer(section: str, role: Role, instrument: Instrument, profile: Profile | None) -> SimulatedSignal:
    """The consumer of one tank."""
    cubic = Scale(factor=1e-6)
    return SimulatedSignal(
        section, "consumer", role, "cm^3/s", (0.0, 20.0), cubic, instrument=instrument, profile=profile
    )


def row(instrument: Instrument = QUIET, profile: Profile | None = None, **changes: Any) -> SimulatedPlantSpec:
    """Three tanks in equilibrium; quiet instruments and consumers unless asked otherwise."""
    names = ("tank-1", "tank-2", "tank-3")
    signals = [signal for name in names for signal in tank_signals(name, instrument)]
    signals.append(consumer("tank-2", Role.UNMEASURED_DISTURBANCE, instrument, profile))
    signals.append(consumer("tank-3", Role.MEASURED_DISTURBANCE, instrument, profile))
    tube = Tube(bore=3e-3, length=0.3)
    spec = SimulatedPlantSpec(
        name="Short Row",
        sections=tuple((name, TANK) for name in names),
        couplings=(("tank-1", "tank-2", tube), ("tank-2", "tank-3", tube)),
        signals=tuple(signals),
        x0=(LEVEL_M, OUTFLOW_M3_S) * 3,
        watchdog_s=1.5,
        window_s=0.4,
        seed=7,
    )
    return replace(spec, **changes)
