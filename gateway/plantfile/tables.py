"""The tables of a plant file as they are written: which keys each may have, and which it must have.

Every key may be absent here, so that a file with a mistake can still be looked at for the others; what a table needs
is in its `required`. Keys that depend on the physics (`area`, `bore`) are gathered as extras.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any, ClassVar, TypeAlias

from pydantic import BaseModel, ConfigDict, PlainValidator, ValidatorFunctionWrapHandler, WrapValidator

from gateway.plantfile import fields as f
from gateway.plantfile.plant import HoldAction, Role, SiteKind


class Table(BaseModel):
    """A table of known keys."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True)
    required: ClassVar[dict[str, str]] = {}
    """Keys that must be there, each with what may stand there."""


class PhysicsTable(Table):
    """A table that also holds parameters of a physics, whose names only the physics knows."""

    model_config = ConfigDict(strict=True, extra="allow", frozen=True)

    @property
    def parameters(self) -> dict[str, Any]:
        """The keys that are no key of the table itself, values unchecked."""
        return dict(self.__pydantic_extra__ or {})


class PlantTable(Table):
    """`[plant]`."""

    required = {"name": "a text", "period": 'a time such as "500 ms"'}
    name: f.Text | None = None
    period: f.Duration | None = None


class WeightsTable(Table):
    """`[controller] weights = { output, input, move }`: of the split's norm, by class of row."""

    output: f.Positive | None = None
    input: f.Positive | None = None
    move: f.Positive | None = None


class CutoffsTable(Table):
    """`[controller.cutoffs]`, fractions of the period."""

    gather: f.Fraction | None = None
    synthesise: f.Fraction | None = None
    write: f.Fraction | None = None


class ControllerTable(Table):
    """`[controller]`."""

    required = {"horizon": "periods to plan ahead, 2 or more", "locality": "couplings to look across, 1 or more"}
    horizon: f.Horizon | None = None
    locality: f.Locality | None = None
    rho: f.Positive | None = None
    relax: f.Relaxation | None = None
    weights: WeightsTable | None = None
    tolerance: f.Share | None = None
    max_iterations: f.Count | None = None
    wander: f.NotNegative | None = None
    cutoffs: CutoffsTable | None = None


class RampTable(Table):
    """`safe_hold = { ramp_to = "30 %", at = "10 %/s" }`."""

    required = {"ramp_to": "the safe value", "at": 'the speed of the ramp, such as "10 %/s"'}
    ramp_to: f.Amount | None = None
    at: f.Amount | None = None


def _safe_hold(value: Any, handler: ValidatorFunctionWrapHandler) -> HoldAction | RampTable:
    if isinstance(value, dict):
        ramp: RampTable = handler(value)
        return ramp
    if value not in (HoldAction.KEEP, HoldAction.HAND_BACK):
        f.refuse('"keep", "hand_back" or { ramp_to = VALUE, at = SPEED }', f.close_to(value, ("keep", "hand_back")))
    return HoldAction(value)


if TYPE_CHECKING:
    SafeHoldChoice: TypeAlias = RampTable | HoldAction
else:  # to pydantic it is a table with a way round it: a true union would answer every slip once per member
    SafeHoldChoice = Annotated[RampTable, WrapValidator(_safe_hold)]


class InstrumentTable(Table):
    """`instrument = { noise, resolution, lag }` of the simulated transmitter."""

    noise: f.Amount | None = None
    resolution: f.Amount | None = None
    lag: f.Lag | None = None


class ProfileTable(Table):
    """`profile = { low, high, mean_low, mean_high }` of the simulated consumer."""

    required = {
        "low": "the lower value",
        "high": "the higher value",
        "mean_low": "the mean time at low",
        "mean_high": "the mean time at high",
    }
    low: f.Amount | None = None
    high: f.Amount | None = None
    mean_low: f.Duration | None = None
    mean_high: f.Duration | None = None


class SignalTable(Table):
    """`[kinds.KIND.signals.NAME]` or `[sections.signals.NAME]`."""

    role: Annotated[Role, PlainValidator(lambda value: f.choose(value, Role))] | None = None
    unit: f.Unit | None = None
    span: f.Band | None = None
    hard: f.Band | None = None
    soft: f.Band | None = None
    soft_price: f.NotNegative | None = None
    target: f.Amount | None = None
    price: f.NotNegative | None = None
    move_price: f.NotNegative | None = None
    rate: f.Amount | None = None
    jump: f.Amount | None = None
    noise: f.Amount | None = None
    rest: f.Amount | None = None
    safe_hold: SafeHoldChoice | None = None
    instrument: InstrumentTable | None = None
    profile: ProfileTable | None = None


class KindTable(PhysicsTable):
    """`[kinds.NAME]`: everything alike, said once."""

    required = {"physics": "the name of a physics"}
    physics: f.Text | None = None
    signals: dict[str, SignalTable] = {}


class SectionsTable(PhysicsTable):
    """One `[[sections]]`: sections of one kind; parameters and signals here are added to or replace the kind's."""

    required = {"names": 'a name or a range such as "tank-{1..8}"', "kind": "the name of a kind"}
    names: f.Names | None = None
    kind: f.Text | None = None
    signals: dict[str, SignalTable] = {}


class CouplingsTable(PhysicsTable):
    """One `[[couplings]]`, along a row or between two."""

    required = {"kind": "the name of a coupling"}
    along: f.Names | None = None
    between: f.Pair | None = None
    kind: f.Text | None = None


class HoldTable(Table):
    """`[hold]`, in periods."""

    latch_after: f.Count | None = None
    latch_window: f.Count | None = None
    clear_for: f.Count | None = None
    blind_after: f.Count | None = None


class PanelTable(Table):
    """`[panel]`."""

    required = {"watchdog": 'a time such as "2 s"', "window": 'a time such as "500 ms"'}
    watchdog: f.Duration | None = None
    window: f.Duration | None = None


class SiteTable(Table):
    """`[sites.NAME]`."""

    required = {
        "link": '"opcua"',
        "endpoint": '"opc.tcp://HOST:PORT"',
        "namespace": "the URI of the namespace",
        "address": "a text with {section} and {signal}",
    }
    kind: Annotated[SiteKind, PlainValidator(lambda value: f.choose(value, SiteKind))] | None = None
    link: f.Link | None = None
    endpoint: f.Endpoint | None = None
    namespace: f.Text | None = None
    address: f.Address | None = None
    panel_address: f.PanelAddress | None = None
    overrides: dict[str, f.Text] = {}
    insecure: f.Flag | None = None
    call_timeout: f.Duration | None = None


class BenchTable(Table):
    """`[bench]`, the simulated plant."""

    seed: f.Seed | None = None
    substep: f.Duration | None = None


class Document(Table):
    """A whole plant file."""

    required = {
        "plant": "a table [plant]",
        "controller": "a table [controller]",
        "kinds": "at least one table [kinds.NAME]",
        "sections": "at least one table [[sections]]",
    }
    plant: PlantTable | None = None
    controller: ControllerTable | None = None
    kinds: dict[str, KindTable] | None = None
    sections: list[SectionsTable] | None = None
    couplings: list[CouplingsTable] = []
    hold: HoldTable | None = None
    panel: PanelTable | None = None
    sites: dict[str, SiteTable] = {}
    bench: BenchTable | None = None
