"""Two tanks to ask things of."""

from gateway.plantfile.plant import (
    BenchSpec,
    ControllerSpec,
    Cutoffs,
    HoldSpec,
    Plant,
    Role,
    Scale,
    SectionSpec,
    Signal,
)

NS = 1_000_000_000


def _tank(name: str) -> SectionSpec:
    level = Signal(
        name, "level", Role.MEASURED, "cm", Scale(0.01), (0.0, 40.0), soft=(4.0, 36.0), target=20.0, price=1.0
    )
    pump = Signal(name, "pump", Role.DRIVEN, "%", Scale(0.01), (0.0, 100.0), hard=(0.0, 100.0))
    return SectionSpec(name, "tank", "tank", {}, (level, pump))


PLANT = Plant(
    name="Two Tanks",
    period_s=0.5,
    sections=(_tank("tank-1"), _tank("tank-2")),
    couplings=(),
    controller=ControllerSpec(horizon=10, locality=1),
    cutoffs=Cutoffs(),
    hold=HoldSpec(),
    panel=None,
    sites={},
    bench=BenchSpec(),
)
