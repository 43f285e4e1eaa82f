"""A small plant for tests of rooms that need one, without reading a plant file."""

from itertools import pairwise

from gateway.plantfile.plant import (
    BenchSpec,
    ControllerSpec,
    CouplingSpec,
    Cutoffs,
    HoldAction,
    HoldSpec,
    Instrument,
    PanelSpec,
    Plant,
    Role,
    SafeHold,
    Scale,
    SectionSpec,
    Signal,
)


def level(section: str, noise: float = 0.02, resolution: float = 0.005, jump_per_s: float = 4.0) -> Signal:
    """A tank's level transmitter of 0..40 cm."""
    return Signal(
        section=section,
        name="level",
        role=Role.MEASURED,
        unit="cm",
        scale=Scale(0.01),
        span=(0.0, 40.0),
        noise=noise,
        jump_per_s=jump_per_s,
        instrument=Instrument(noise, resolution),
    )


def pump(section: str) -> Signal:
    """A tank's pump of 0..100 % at 20 %/s."""
    return Signal(
        section=section,
        name="pump",
        role=Role.DRIVEN,
        unit="%",
        scale=Scale(0.01),
        span=(0.0, 100.0),
        hard=(0.0, 100.0),
        rate_per_s=20.0,
        safe_hold=SafeHold(HoldAction.RAMP, to=30.0, rate_per_s=10.0),
    )


def consumer(section: str) -> Signal:
    """A measured consumer of 0..20 cm3/s."""
    return Signal(
        section=section,
        name="consumer",
        role=Role.MEASURED_DISTURBANCE,
        unit="cm^3/s",
        scale=Scale(1e-6),
        span=(0.0, 20.0),
        noise=0.05,
    )


def row_of_tanks(count: int, *, panel: bool = True, noise: float = 0.02, resolution: float = 0.005) -> Plant:
    """`count` tanks in a row, 500 ms, with a measured consumer at the second."""
    names = [f"tank-{number}" for number in range(1, count + 1)]
    return Plant(
        name="row",
        period_s=0.5,
        sections=tuple(
            SectionSpec(
                name,
                "tank",
                "tank",
                {},
                (level(name, noise, resolution), pump(name), *((consumer(name),) if name == "tank-2" else ())),
            )
            for name in names
        ),
        couplings=tuple(CouplingSpec(one, other, "tube", {}) for one, other in pairwise(names)),
        controller=ControllerSpec(horizon=20, locality=2),
        cutoffs=Cutoffs(),
        hold=HoldSpec(),
        panel=PanelSpec(watchdog_s=2.0, window_s=0.5) if panel else None,
        sites={},
        bench=BenchSpec(),
    )
