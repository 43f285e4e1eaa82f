"""Written parameters of a physics to SI numbers: names, dimensions, what is missing, and whether they fit together."""

from __future__ import annotations

from typing import Any

from gateway.plantfile import units
from gateway.plantfile.catalogue import ParameterEntry, PhysicsEntry
from gateway.plantfile.fields import finite
from gateway.plantfile.mistakes import Ledger, nearest
from gateway.plantfile.tables import CouplingsTable, KindTable, PhysicsTable, SectionsTable
from gateway.plantfile.units import UnitError
from gateway.plantfile.written import WrittenParameters

_TABLES: dict[str | int, type[PhysicsTable]] = {
    "kinds": KindTable,
    "sections": SectionsTable,
    "couplings": CouplingsTable,
}
"""Whose own keys may stand beside parameters, for the nearest spelling of a wrong one."""


def read_parameters(written: WrittenParameters, physics: PhysicsEntry, ledger: Ledger) -> dict[str, float]:
    """Return the parameters in SI units by the names of the physics, in its order.

    Args:
        written: what the file says.
        physics: whose parameters they are.
        ledger: takes the mistakes; the result is complete only when there are none.
    """
    for key in written.values:
        if key not in physics.parameters:
            place = written.place(key)
            ledger.add_unknown(place, {*physics.parameters, *_TABLES[place[0]].model_fields})
    values: dict[str, float] = {}
    for key, entry in physics.parameters.items():
        place = written.place(key)
        if key not in written.values:
            if entry.default is None:
                ledger.add_missing(place, f"{entry.description}, {_wanted(entry)}")
            continue
        try:
            values[entry.name] = _si(written.values[key], entry)
        except UnitError as error:
            ledger.add(place, written.values[key], str(error), error.suggestion)
    complete = all(entry.name in values or entry.default is not None for entry in physics.parameters.values())
    if complete:
        _check_together(values, written, physics, ledger)
    defaults = {entry.name: entry.default for entry in physics.parameters.values() if entry.default is not None}
    return {entry.name: values.get(entry.name, defaults.get(entry.name, 0.0)) for entry in physics.parameters.values()}


def find_misspelled(key: str, written: WrittenParameters, ledger: Ledger) -> None:
    """Note the parameter that was meant to be a missing key of the table itself, `physic` for `physics`.

    Without that key no physics is known, and so no parameter could be called unknown otherwise.
    """
    close = nearest(key, written.values)
    if close is not None:
        place = written.place(close)
        ledger.add_unknown(place, _TABLES[place[0]].model_fields)


def _si(value: Any, entry: ParameterEntry) -> float:
    if isinstance(value, str):
        return units.value_in(value, entry.unit)
    number = finite(value)
    if number is None or not units.is_plain(entry.unit):
        raise UnitError(_wanted(entry))
    return number


def _wanted(entry: ParameterEntry) -> str:
    if units.is_plain(entry.unit):
        return 'a finite number, or a text such as "50 %"'
    return f"a text with a unit that converts to {entry.unit}"


def _check_together(
    values: dict[str, float], written: WrittenParameters, physics: PhysicsEntry, ledger: Ledger
) -> None:
    """Let the physics judge its numbers: a bore below 0, a rim at the floor."""
    try:
        physics.build(**values)
    except ValueError as error:
        text = str(error)
        key = next((key for key, entry in physics.parameters.items() if entry.name in text.split()), None)
        place = written.home if key is None else written.place(key)
        ledger.add(place, physics.name if key is None else written.values.get(key), text)
