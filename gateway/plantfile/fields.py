"""Types of the values a plant file may hold, each with a check whose message says what is allowed.

A check gets whatever TOML gave and either returns the value or raises by `refuse`; pydantic collects what is raised,
so that one reading finds every wrong value. Dimensions are checked where the unit is known, not here.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from enum import StrEnum
from math import isfinite
from string import Formatter
from typing import Annotated, Any, NoReturn, TypeAlias
from urllib.parse import urlsplit

from pydantic import PlainValidator
from pydantic_core import PydanticCustomError

from gateway.plantfile import units
from gateway.plantfile.mistakes import nearest
from gateway.plantfile.names import NamePatternError, expand
from gateway.plantfile.units import UnitError

REFUSED = "refused"
"""Type of our own errors among pydantic's."""


def refuse(allowed: str, suggestion: str | None = None) -> NoReturn:
    """Refuse a value, saying what is allowed and the nearest right spelling."""
    raise PydanticCustomError(REFUSED, "{allowed}", {"allowed": allowed, "suggestion": suggestion})


def finite(value: object) -> float | None:
    """Return a finite number as a float, None for anything else, also for a whole number beyond all floats."""
    if not isinstance(value, int | float) or isinstance(value, bool):
        return None
    try:
        number = float(value)
    except OverflowError:
        return None
    return number if isfinite(number) else None


def close_to(value: object, words: Iterable[str]) -> str | None:
    """Return the word closest to a value that should have been one of them."""
    return nearest(value, words) if isinstance(value, str) else None


def _number(allowed: str, test: Callable[[float], bool]) -> Callable[[Any], float]:
    def check(value: Any) -> float:
        number = finite(value)
        if number is None or not test(number):
            refuse(allowed)
        return number

    return check


def _count(least: int, most: int) -> Callable[[Any], int]:
    def check(value: Any) -> int:
        if not isinstance(value, int) or isinstance(value, bool) or not least <= value <= most:
            refuse(f"a whole number from {least} to {most}")
        return value

    return check


def _time(allowed: str, test: Callable[[float], bool]) -> Callable[[Any], float]:
    def check(value: Any) -> float:
        try:
            result = units.seconds(value) if isinstance(value, str) else None
        except UnitError as error:
            refuse(allowed, error.suggestion)
        if result is None or not test(result):
            refuse(allowed)
        return result

    return check


def _amount(value: Any) -> float | str:
    if isinstance(value, str):
        try:
            units.split(value)
        except UnitError as error:
            refuse(f"a finite number, or a text with its unit: {error}", error.suggestion)
        return value
    number = finite(value)
    if number is None:
        refuse("a finite number, or a text with its unit")
    return number


def _band(value: Any) -> tuple[float | str, float | str]:
    if not isinstance(value, list) or len(value) != 2:
        refuse("an array of two, [low, high]")
    return _amount(value[0]), _amount(value[1])


def _share(value: Any) -> float:
    allowed = 'a number above 0 and below 1, or a text such as "0.2 %"'
    try:
        share = units.value_in(value, "1") if isinstance(value, str) else finite(value)
    except UnitError:
        refuse(allowed)
    if share is None or not 0 < share < 1:
        refuse(allowed)
    return share


def _text(value: Any) -> str:
    if not isinstance(value, str) or not value.strip():
        refuse("a text in quotes, not empty")
    return value


def _flag(value: Any) -> bool:
    if not isinstance(value, bool):
        refuse("true or false")
    return value


def _unit(value: Any) -> str:
    text = _text(value)
    try:
        units.check_unit(text)
    except UnitError as error:
        refuse(str(error), error.suggestion)
    return text


def choose(value: Any, allowed: type[StrEnum]) -> Any:
    """Return the member of an enum that a text names, or refuse."""
    words = [member.value for member in allowed]
    if value not in words:
        refuse(", ".join(f'"{word}"' for word in words), close_to(value, words))
    return allowed(value)


def _names(value: Any) -> tuple[str, ...]:
    try:
        return expand(_text(value))
    except NamePatternError as error:
        refuse(str(error))


def _pair(value: Any) -> tuple[str, str]:
    if not isinstance(value, list) or len(value) != 2:
        refuse('an array of two section names, ["tank-1", "tank-5"]')
    return _text(value[0]), _text(value[1])


def _pattern(*placeholders: str) -> Callable[[Any], str]:
    wanted = " and ".join(f"{{{name}}}" for name in placeholders)

    def check(value: Any) -> str:
        text = _text(value)
        try:
            fields = [
                (name, spec, conversion) for _, name, spec, conversion in Formatter().parse(text) if name is not None
            ]
        except ValueError:
            refuse(f"a text with {wanted}, every brace closed")
        unknown = [name for name, spec, conversion in fields if name not in placeholders or spec or conversion]
        if unknown:
            refuse(f"a text with {wanted} and no other placeholder", nearest(unknown[0], placeholders))
        if {name for name, _, _ in fields} != set(placeholders):
            refuse(f"a text with {wanted}, so that every signal has its own address")
        return text

    return check


def _endpoint(value: Any) -> str:
    text = _text(value)
    try:
        parts = urlsplit(text)
        whole = parts.scheme == "opc.tcp" and bool(parts.hostname) and (parts.port or 0) > 0
    except ValueError:
        whole = False
    if not whole:
        refuse('"opc.tcp://HOST:PORT", such as "opc.tcp://127.0.0.1:4840"')
    return text


def _link(value: Any) -> str:
    if value != "opcua":
        refuse('"opcua"; it is the only link there is so far')
    return "opcua"


Positive: TypeAlias = Annotated[float, PlainValidator(_number("a finite number above 0", lambda value: value > 0))]
NotNegative: TypeAlias = Annotated[
    float, PlainValidator(_number("a finite number, 0 or more", lambda value: value >= 0))
]
Fraction: TypeAlias = Annotated[
    float, PlainValidator(_number("a number above 0 and below 1", lambda value: 0 < value < 1))
]
Relaxation: TypeAlias = Annotated[
    float, PlainValidator(_number("a number above 0 and below 2", lambda value: 0 < value < 2))
]
Share: TypeAlias = Annotated[float, PlainValidator(_share)]
"""A part of a whole: 0.002 or "0.2 %"."""
Seed: TypeAlias = Annotated[int, PlainValidator(_count(0, 2**32 - 1))]
Count: TypeAlias = Annotated[int, PlainValidator(_count(1, 1_000_000))]
Horizon: TypeAlias = Annotated[int, PlainValidator(_count(2, 1000))]
Locality: TypeAlias = Annotated[int, PlainValidator(_count(1, 1000))]
Duration: TypeAlias = Annotated[
    float, PlainValidator(_time('a time above 0 with its unit, such as "500 ms"', lambda value: value > 0))
]
"""Seconds, from a text."""
Lag: TypeAlias = Annotated[
    float, PlainValidator(_time('a time, 0 or more, with its unit, such as "200 ms"', lambda value: value >= 0))
]
Amount: TypeAlias = Annotated[float | str, PlainValidator(_amount)]
"""A number in the signal's own unit, or a text with a unit."""
Band: TypeAlias = Annotated[tuple[float | str, float | str], PlainValidator(_band)]
Text: TypeAlias = Annotated[str, PlainValidator(_text)]
Flag: TypeAlias = Annotated[bool, PlainValidator(_flag)]
Unit: TypeAlias = Annotated[str, PlainValidator(_unit)]
Names: TypeAlias = Annotated[tuple[str, ...], PlainValidator(_names)]
"""Section names, from a pattern."""
Pair: TypeAlias = Annotated[tuple[str, str], PlainValidator(_pair)]
Address: TypeAlias = Annotated[str, PlainValidator(_pattern("section", "signal"))]
PanelAddress: TypeAlias = Annotated[str, PlainValidator(_pattern("signal"))]
Endpoint: TypeAlias = Annotated[str, PlainValidator(_endpoint)]
Link: TypeAlias = Annotated[str, PlainValidator(_link)]
