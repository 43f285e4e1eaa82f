"""Engineering units as OPC 10000-8, 5.6.3 wants them: the codes of UNECE Recommendation 20, packed into an integer.

    UnitId = Σ c_i 256^(n−1−i)      c_i ASCII codes of the n ≤ 3 characters of the code         ("CMT" → 4410708)

A unit without a code there gets UnitId −1 and our own namespace, as the standard provides.
"""

from __future__ import annotations

from typing import NamedTuple

from asyncua import ua

UNECE = "http://www.opcfoundation.org/UA/units/un/cefact"
OTHERS = "urn:lengthsman:units"


class Unit(NamedTuple):
    """Code, symbol and name in the Recommendation."""

    code: str
    symbol: str
    name: str


_UNITS = {
    "%": Unit("P1", "%", "percent"),
    "m": Unit("MTR", "m", "metre"),
    "cm": Unit("CMT", "cm", "centimetre"),
    "mm": Unit("MMT", "mm", "millimetre"),
    "m/s": Unit("MTS", "m/s", "metre per second"),
    "s": Unit("SEC", "s", "second"),
    "min": Unit("MIN", "min", "minute [unit of time]"),
    "m3/s": Unit("MQS", "m³/s", "cubic metre per second"),
    "m3/h": Unit("MQH", "m³/h", "cubic metre per hour"),
    "cm3/s": Unit("2J", "cm³/s", "cubic centimetre per second"),
    "l/min": Unit("L2", "l/min", "litre per minute"),
    "degc": Unit("CEL", "°C", "degree Celsius"),
    "k": Unit("KEL", "K", "kelvin"),
    "n": Unit("NEW", "N", "newton"),
    "w": Unit("WTT", "W", "watt"),
    "kw": Unit("KWT", "kW", "kilowatt"),
    "pa": Unit("PAL", "Pa", "pascal"),
    "kpa": Unit("KPA", "kPa", "kilopascal"),
    "bar": Unit("BAR", "bar", "bar [unit of pressure]"),
    "v": Unit("VLT", "V", "volt"),
    "a": Unit("AMP", "A", "ampere"),
    "rpm": Unit("RPM", "r/min", "revolutions per minute"),
}
_SPELLINGS = {
    "percent": "%",
    "°c": "degc",
    "celsius": "degc",
    "delta_degc": "degc",
    "liter/min": "l/min",
    "kelvin": "k",
}


def unit_id(code: str) -> int:
    """Pack a code of the Recommendation into a UnitId."""
    return int.from_bytes(code.encode("ascii"), "big")


def engineering_units(text: str) -> ua.EUInformation:
    """Describe a unit as written in a plant file ("cm^3/s", "%"), for the property EngineeringUnits."""
    plain = text.replace(" ", "").replace("**", "").replace("^", "").replace("³", "3").lower()
    unit = _UNITS.get(_SPELLINGS.get(plain, plain))
    if unit is None:
        shown = ua.LocalizedText(text)
        return ua.EUInformation(NamespaceUri=OTHERS, UnitId=-1, DisplayName=shown, Description=shown)
    return ua.EUInformation(
        NamespaceUri=UNECE,
        UnitId=unit_id(unit.code),
        DisplayName=ua.LocalizedText(unit.symbol),
        Description=ua.LocalizedText(unit.name),
    )
