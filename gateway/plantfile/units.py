"""Units: the one place where text quantities become numbers. Dimensions are checked here, conversions made here.

A quantity is a number followed by its unit: "40 cm^2", "20 %/s", "500 ms". Units are pint's; `cm3`
is taken as `cm^3`, and "%" as a hundredth. An offset unit (degC) is affine for a value and plain for a difference or
a rate: 20 degC is 293.15 K, but 2 degC/s is 2 K/s. Conversions are rounded to 15 significant digits, so that a
hundred millimetres are exactly ten centimetres.
"""

from __future__ import annotations

import re
from functools import cache
from math import isclose, isfinite

import pint

from gateway.plantfile.mistakes import nearest
from gateway.plantfile.plant import Scale

_QUANTITY = re.compile(r"\s*([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,3})?)\s*(.*?)\s*", re.DOTALL)

_NAME = r"[^\W\d_][^\W\d]*"
_FACTOR = rf"(?:1|°?{_NAME}|%)(?:\^?-?[0-9])?"
_UNIT = re.compile(rf"/?\(?{_FACTOR}(?:\s*[*/· ]\s*\(?{_FACTOR}\)?)*", re.UNICODE)
"""Products and quotients of names with one-digit exponents; anything more might be arithmetic rather than a unit."""

_LONGEST = 40
_FAR = 1e9
"""Where the slope of an offset unit is measured: far enough for the offset's rounding to vanish."""

_PLAIN = dict.fromkeys(("", "1", "-", "fraction", "dimensionless"), "dimensionless")
_COMMON = (
    "mm cm m km mm^2 cm^2 m^2 cm^3 m^3 l ml ms s min h % %/s mm/s cm/s m/s cm^3/s m^3/s l/s l/min "
    "degC K degC/s K/s W kW W/K J J/K kg N Pa kPa bar V A Hz rpm"
)
"""Units worth suggesting for a misspelled one."""


class UnitError(ValueError):
    """A quantity or unit is wrong; the message says what is allowed.

    Attributes:
        suggestion: the nearest common unit, None when nothing comes close.
    """

    def __init__(self, allowed: str, suggestion: str | None = None) -> None:
        super().__init__(allowed)
        self.suggestion = suggestion


@cache
def _registry() -> pint.UnitRegistry[float]:
    return pint.UnitRegistry()


@cache
def _unit(text: str) -> pint.Unit:
    """Parse a unit.

    Raises:
        UnitError: nobody knows it, or it is not a unit at all.
    """
    text = text.strip()
    plain = _PLAIN.get(text, text)
    if len(plain) > _LONGEST or not _UNIT.fullmatch(plain):
        raise UnitError('a unit such as "cm", "%", "cm^3/s" or "degC"', nearest(text, _COMMON.split()))
    plain = f"1{plain}" if plain.startswith("/") else plain
    spelled = re.sub(r"(?<=[^\W\d_])(?=[0-9]|-[0-9])", "^", plain).replace("·", "*")
    try:
        return _registry().parse_units(spelled)
    except Exception as error:  # pint lets the tokenizer's own errors through as well
        raise UnitError("a unit that is known", nearest(text, _COMMON.split())) from error


def _dimension(unit: pint.Unit) -> str:
    text = str(unit.dimensionality)
    return "no dimension" if text == "dimensionless" else f"the dimension {text}"


def check_unit(text: str) -> None:
    """Check that a text is a unit.

    Raises:
        UnitError: it is not.
    """
    _unit(text)


def is_plain(text: str) -> bool:
    """Whether a unit says "just a number"."""
    return text.strip() in _PLAIN


def conversion(text: str, to: str) -> Scale:
    """Return the affine conversion from one unit to another, offset units included.

    Raises:
        UnitError: an unknown unit, another dimension, or a scale that is not affine (decibel).
    """
    unit, target = _unit(text), _unit(to)
    if unit.dimensionality != target.dimensionality:
        raise UnitError(f"a unit with {_dimension(target)}, such as {to or '%'}")
    try:
        at_0, at_1, at_2 = (_converted(value, unit, target) for value in (0.0, 1.0, 2.0))
    except pint.PintError as error:
        raise UnitError(f"a unit that converts to {to}") from error
    if not isclose(at_2 - at_1, at_1 - at_0, rel_tol=1e-9):
        raise UnitError("a linear unit")
    factor = at_1 if at_0 == 0.0 else (_converted(_FAR, unit, target) - at_0) / _FAR
    return Scale(factor=_rounded(factor), offset=_rounded(at_0, 12))


def _converted(value: float, unit: pint.Unit, target: pint.Unit) -> float:
    return float(_registry().Quantity(value, unit).to(target).magnitude)


def _rounded(value: float, digits: int = 15) -> float:
    return float(f"{value:.{digits}g}")


def split(quantity: str) -> tuple[float, str]:
    """Split a text into its number and its unit.

    A unit must be there: "30" where percents are meant would be thirty times everything.

    Raises:
        UnitError: no number, one that is not finite, or no unit.
    """
    match = _QUANTITY.fullmatch(quantity)
    if match is None or not match[2] or not isfinite(float(match[1])):
        raise UnitError('a finite number with its unit, such as "40 cm"')
    return float(match[1]), match[2]


def value_in(quantity: str, unit: str) -> float:
    """Return a quantity in a unit.

    Raises:
        UnitError: not a quantity, or of another dimension.
    """
    number, own = split(quantity)
    return _rounded(conversion(own, unit).to_physics(number))


def difference_in(quantity: str, unit: str) -> float:
    """Return a difference in a unit: offsets don't count, so 2 K is 2 degC.

    Raises:
        UnitError: not a quantity, or of another dimension.
    """
    number, own = split(quantity)
    return _rounded(conversion(own, unit).factor * number)


def rate_in(quantity: str, unit: str) -> float:
    """Return a speed in the unit per second.

    Raises:
        UnitError: not a quantity, or not one of this unit per time.
    """
    number, own = split(quantity)
    per_second = "1/s" if unit in _PLAIN else f"{unit}/s"
    if _unit(own).dimensionality != _unit(per_second).dimensionality:
        raise UnitError(f'a change of {unit} in a time, such as "5 {per_second}"')
    return _rounded(conversion(own, per_second).factor * number)


def seconds(quantity: str) -> float:
    """Return a time in seconds.

    Raises:
        UnitError: not a quantity, or not a time.
    """
    return value_in(quantity, "s")
