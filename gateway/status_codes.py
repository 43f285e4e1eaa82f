"""What a 32-bit OPC UA status code says: severity from its bits, name from the standard's table.

    bits 31..30   severity: 00 good, 01 uncertain, 10 bad, 11 reserved (to be treated as bad)
    bits 29..16   with the severity, the sub code the table names
    bits 15..0    structure changed, semantics changed, limit, overflow ...: never part of the meaning

Sources: OPC 10000-4, 7.39 (bits), OPC 10000-6, annex A (table, as asyncua carries it).
"""

from __future__ import annotations

from enum import StrEnum

from asyncua.ua import status_codes as table

LARGEST = 0xFFFF_FFFF
NAMED = 0xFFFF_0000
"""Mask of the bits the table names."""


class Severity(StrEnum):
    """What a value with a status code may be used for."""

    GOOD = "good"
    UNCERTAIN = "uncertain"
    BAD = "bad"


_BY_TOP_BITS = (Severity.GOOD, Severity.UNCERTAIN, Severity.BAD, Severity.BAD)


def severity(code: int) -> Severity:
    """Severity of a status code (OPC 10000-4, 7.39).

    Raises:
        ValueError: the code does not fit 32 bits.
    """
    _check(code)
    return _BY_TOP_BITS[code >> 30]


def name(code: int) -> str:
    """Name of a status code in the standard's table, its severity and number when the table lacks it.

    Raises:
        ValueError: the code does not fit 32 bits.
    """
    _check(code)
    named = table.code_to_name_doc.get(code & NAMED)
    return named[0] if named is not None else f"{severity(code).capitalize()} (0x{code:08X})"


def _check(code: int) -> None:
    if not 0 <= code <= LARGEST:
        raise ValueError(f"status code {code} does not fit 32 bits: hand over the code as the peer sent it")
