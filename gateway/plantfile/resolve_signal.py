"""One written signal to one resolved `Signal`: dimensions, defaults, and everything that must hold between its numbers.

Numbers are in the signal's own unit. Limits nest, each inside the next wider one:

    target, rest, ramp_to  in  soft  in  hard  in  span
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from math import inf

from gateway.plantfile import units
from gateway.plantfile.catalogue import PhysicsEntry
from gateway.plantfile.lines import Place
from gateway.plantfile.mistakes import Ledger, nearest
from gateway.plantfile.plant import HoldAction, Instrument, Profile, Role, SafeHold, Scale, Signal
from gateway.plantfile.tables import RampTable, SignalTable, Table
from gateway.plantfile.units import UnitError
from gateway.plantfile.written import WrittenSignal

Limits = tuple[float, float]

DEFAULT_SOFT_PRICE = 10.0
"""Price of leaving the soft band when the file gives a band without one: ten times the usual price of a target."""

_ALWAYS = {"role", "unit", "span", "rest"}
_AIMS = {"soft", "soft_price", "target", "price"}
_SENSED = {"jump", "noise", "instrument"}
KEYS_OF_ROLE: dict[Role, set[str]] = {
    Role.MEASURED: _ALWAYS | _AIMS | _SENSED,
    Role.DRIVEN: _ALWAYS | _AIMS | {"hard", "rate", "move_price", "safe_hold"},
    Role.MEASURED_DISTURBANCE: _ALWAYS | _SENSED | {"profile"},
    Role.UNMEASURED_DISTURBANCE: _ALWAYS | {"profile"},
}
"""Keys that mean something for a role; any other would be silently without effect, so it is refused."""

_REQUIRED = {
    "role": ", ".join(f'"{role.value}"' for role in Role),
    "unit": 'a unit such as "cm"',
    "span": "the engineering range, [low, high]",
}


@dataclass
class _Draft:
    """A signal half read: what is None was not written, or is spoiled."""

    written: WrittenSignal
    ledger: Ledger
    unit: str | None = None
    bands: dict[str, Limits] = field(default_factory=dict)
    points: dict[str, float] = field(default_factory=dict)

    @property
    def table(self) -> SignalTable:
        return self.written.table

    def number(
        self, value: float | str | None, place: Place, convert: Callable[[str, str], float] = units.value_in
    ) -> float | None:
        """Return a bare number as it is, a quantity in the signal's unit; note a wrong dimension."""
        if not isinstance(value, str):
            return value
        if self.unit is None:
            return None
        try:
            return convert(value, self.unit)
        except UnitError as error:
            self.ledger.add(place, value, str(error), error.suggestion)
            return None

    def positive(self, value: float | str | None, place: Place, convert: Callable[[str, str], float]) -> float | None:
        """As `number`, and above 0."""
        number = self.number(value, place, convert)
        if number is not None and number <= 0:
            self.ledger.add(place, value, "above 0")
        return number

    def not_negative(self, value: float | str | None, place: Place) -> float | None:
        """As `number` for a difference, and 0 or more."""
        number = self.number(value, place, units.difference_in)
        if number is not None and number < 0:
            self.ledger.add(place, value, "0 or more")
        return number


def read_signal(name: str, written: WrittenSignal, physics: PhysicsEntry | None, ledger: Ledger) -> Signal | None:
    """Resolve a signal of a yet unnamed section; None when something is wrong with it, which is then in the ledger."""
    table = written.table
    for key, allowed in _REQUIRED.items():
        if getattr(table, key) is None:
            ledger.add_missing(written.place(key), allowed)
    draft = _Draft(written, ledger, unit=table.unit)
    scale = _scale(name, draft, physics)
    _check_keys(draft)
    _read_bands(draft)
    _read_points(draft)
    _check_prices(draft)
    noise = draft.not_negative(table.noise, written.place("noise"))
    rate = draft.positive(table.rate, written.place("rate"), units.rate_in)
    jump = draft.positive(table.jump, written.place("jump"), units.rate_in)
    safe_hold, instrument, profile = _safe_hold(draft), _instrument(draft), _profile(draft)
    if scale is None or table.role is None or table.unit is None or "span" not in draft.bands:
        return None
    low, high = draft.bands["span"]
    return Signal(
        section="",
        name=name,
        role=table.role,
        unit=table.unit,
        scale=scale,
        span=(low, high),
        hard=draft.bands.get("hard", (-inf, inf)),
        soft=draft.bands.get("soft", (-inf, inf)),
        soft_price=_soft_price(table),
        target=draft.points.get("target"),
        price=table.price or 0.0,
        move_price=table.move_price or 0.0,
        rate_per_s=inf if rate is None else rate,
        jump_per_s=inf if jump is None else jump,
        noise=instrument.noise if noise is None else noise,
        rest=draft.points.get("rest", min(max(0.0, low), high)),
        safe_hold=safe_hold,
        instrument=instrument,
        profile=profile,
    )


def _scale(name: str, draft: _Draft, physics: PhysicsEntry | None) -> Scale | None:
    """Conversion to the unit of the physics, which must know a signal of this name in this role."""
    table, written, ledger = draft.table, draft.written, draft.ledger
    if physics is None:
        return None
    slot = physics.slots.get(name)
    if slot is None:
        allowed = f"a signal of physics {physics.name}: {', '.join(physics.slots)}"
        ledger.add(written.home, name, allowed, nearest(name, physics.slots))
        return None
    if table.role is not None and table.role not in slot.roles:
        allowed = " or ".join(f'"{role.value}"' for role in slot.roles)
        ledger.add(written.place("role"), table.role.value, f"{allowed}, for {name} of physics {physics.name}")
    if table.unit is None:
        return None
    try:
        return units.conversion(table.unit, slot.unit)
    except UnitError as error:
        ledger.add(written.place("unit"), table.unit, str(error), error.suggestion)
        draft.unit = None
        return None


def _check_keys(draft: _Draft) -> None:
    """A key that the role gives no meaning to would be silently without effect."""
    role = draft.table.role
    if role is None or draft.ledger.spoiled(draft.written.place("role")):
        return
    for key in sorted(draft.table.model_fields_set - KEYS_OF_ROLE[role]):
        value = getattr(draft.table, key)
        read = value.model_dump(exclude_none=True) if isinstance(value, Table) else value
        allowed = f"for a {role.value} signal {', '.join(sorted(KEYS_OF_ROLE[role]))}"
        draft.ledger.add(draft.written.place(key), read, allowed)


def _read_bands(draft: _Draft) -> None:
    """Read span, hard and soft; each must run up and lie inside the wider ones."""
    for key in ("span", "hard", "soft"):
        raw: tuple[float | str, float | str] | None = getattr(draft.table, key)
        if raw is None:
            continue
        place = draft.written.place(key)
        low, high = (draft.number(end, place) for end in raw)
        if low is None or high is None:
            continue
        if low >= high:
            draft.ledger.add(place, list(raw), "low below high")
            continue
        for wider, (least, most) in reversed(draft.bands.items()):
            if low < least or high > most:
                draft.ledger.add(place, list(raw), f"within {wider}, {_band_text(least, most, draft)}")
                break
        draft.bands[key] = (low, high)
    if draft.table.role is Role.DRIVEN and draft.table.hard is None:
        draft.ledger.add_missing(draft.written.place("hard"), "hard limits; nothing is driven without them")


def _read_points(draft: _Draft) -> None:
    """Read target and rest; both must lie inside every band there is."""
    for key in ("target", "rest"):
        place = draft.written.place(key)
        value = draft.number(getattr(draft.table, key), place)
        if value is None:
            continue
        _check_inside(value, draft, place, ("span", "hard", "soft"))
        draft.points[key] = value


def _check_inside(value: float, draft: _Draft, place: Place, bands: tuple[str, ...]) -> None:
    for key in bands:
        least, most = draft.bands.get(key, (-inf, inf))
        if not least <= value <= most:
            draft.ledger.add(place, value, f"within {key}, {_band_text(least, most, draft)}")
            return


def _band_text(least: float, most: float, draft: _Draft) -> str:
    return f"{least:g} to {most:g} {draft.unit or ''}".rstrip()


def _check_prices(draft: _Draft) -> None:
    """A target without a price pulls nothing, a price without a target pulls nowhere; the same for the soft band."""
    for aim, price in (("target", "price"), ("soft", "soft_price")):
        has_aim, has_price = getattr(draft.table, aim) is not None, getattr(draft.table, price) is not None
        if has_price and not has_aim:
            draft.ledger.add_missing(draft.written.place(aim), f"a {aim} for the {price}")
        if has_aim and not has_price and aim == "target":
            draft.ledger.add_missing(draft.written.place(price), f"a {price} for the {aim}")


def _soft_price(table: SignalTable) -> float:
    if table.soft is None:
        return 0.0
    return DEFAULT_SOFT_PRICE if table.soft_price is None else table.soft_price


def _safe_hold(draft: _Draft) -> SafeHold | None:
    choice = draft.table.safe_hold
    if not isinstance(choice, RampTable):
        return None if choice is None else SafeHold(HoldAction(choice))
    to_place = draft.written.place("safe_hold", "ramp_to")
    to = draft.number(choice.ramp_to, to_place)
    if to is not None:
        _check_inside(to, draft, to_place, ("span", "hard"))
    rate = draft.positive(choice.at, draft.written.place("safe_hold", "at"), units.rate_in)
    return SafeHold(HoldAction.RAMP, to=to, rate_per_s=rate)


def _instrument(draft: _Draft) -> Instrument:
    table = draft.table.instrument
    if table is None:
        return Instrument()
    noise = draft.not_negative(table.noise, draft.written.place("instrument", "noise"))
    resolution = draft.not_negative(table.resolution, draft.written.place("instrument", "resolution"))
    return Instrument(noise=noise or 0.0, resolution=resolution or 0.0, lag_s=table.lag or 0.0)


def _profile(draft: _Draft) -> Profile | None:
    table = draft.table.profile
    if table is None:
        return None
    ends = {"low": table.low, "high": table.high}
    values = {key: draft.number(end, draft.written.place("profile", key)) for key, end in ends.items()}
    for key, value in values.items():
        if value is not None:
            _check_inside(value, draft, draft.written.place("profile", key), ("span",))
    low, high = values["low"], values["high"]
    if low is None or high is None or table.mean_low is None or table.mean_high is None:
        return None
    if low >= high:
        draft.ledger.add(draft.written.place("profile", "low"), table.low, f"below high, {high:g} {draft.unit or ''}")
    return Profile(low=low, high=high, mean_low_s=table.mean_low, mean_high_s=table.mean_high)
