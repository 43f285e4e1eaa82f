"""Values between the wire of OPC UA and Python.

In: whatever a server sends becomes a `Reading` of plain Python values (float, int, bool, str, bytes, None, lists of
them); nothing a server sends raises. Out: a number is encoded as exactly the type of its node, because servers refuse
any other, and as a value only, because many refuse a write that carries a status or timestamps. Back: what the status
of a write says of its value.

Instants are Unix nanoseconds; the wire counts 100 ns steps since 1601 (OPC 10000-6, 5.2.2.5), asyncua keeps
microseconds of them.
"""

from __future__ import annotations

import math
import struct
from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from enum import Enum
from typing import Any

import numpy as np
from asyncua import ua
from asyncua.ua.status_codes import StatusCodes

from gateway.links.protocol import WriteOutcome
from gateway.signals import Reading
from gateway.status_codes import NAMED, Severity, severity

_PLAIN = (bool, int, float, str, bytes, type(None))
_UNIX_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_WIRE_EPOCH = datetime(1601, 1, 1, tzinfo=UTC)
_MICROSECOND = timedelta(microseconds=1)

_UNWRAP: tuple[tuple[type, Callable[[Any], object]], ...] = (
    (ua.Variant, lambda variant: variant.Value),
    (ua.DataValue, lambda answer: answer.Value),
    (ua.LocalizedText, lambda text: text.Text or ""),
    (ua.StatusCode, lambda status: int(status.value)),
    (Enum, lambda choice: choice.value),
    (datetime, datetime.isoformat),
)
"""What the library wraps values in, and how to get at them."""

INTEGERS: dict[ua.VariantType, tuple[int, int]] = {
    ua.VariantType.SByte: (-(2**7), 2**7 - 1),
    ua.VariantType.Byte: (0, 2**8 - 1),
    ua.VariantType.Int16: (-(2**15), 2**15 - 1),
    ua.VariantType.UInt16: (0, 2**16 - 1),
    ua.VariantType.Int32: (-(2**31), 2**31 - 1),
    ua.VariantType.UInt32: (0, 2**32 - 1),
    ua.VariantType.Int64: (-(2**63), 2**63 - 1),
    ua.VariantType.UInt64: (0, 2**64 - 1),
}
"""Integer types and their ranges (OPC 10000-6, table 1)."""

FLOATS = (ua.VariantType.Float, ua.VariantType.Double)


MAYBE_TAKEN = frozenset({StatusCodes.BadTimeout, StatusCodes.BadRequestTimeout, StatusCodes.BadCommunicationError})
"""Bad codes by which a server says that it lost sight of a write on its way to the device."""


class UnencodableError(Exception):
    """The node's type cannot hold the value."""


def reading(answer: ua.DataValue) -> Reading:
    """One answer of a Read as it came; an absent status means good (OPC 10000-6, 5.2.2.17)."""
    return Reading(
        value=plain(answer.Value),
        status=0 if answer.StatusCode is None else int(answer.StatusCode.value),
        source_ns=unix_ns(answer.SourceTimestamp),
        server_ns=unix_ns(answer.ServerTimestamp),
    )


def plain(value: object) -> object:
    """Strip a value of the library's types; structures without a plain counterpart become their text."""
    if type(value) in _PLAIN:
        return value
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    for kind, inner in _UNWRAP:
        if isinstance(value, kind):
            return plain(inner(value))
    try:
        return str(value)
    except Exception:  # noqa: BLE001 - a structure that cannot even be printed is still no reason to miss a period
        return f"<{type(value).__name__}>"


def unix_ns(stamp: datetime | None) -> int | None:
    """Unix nanoseconds of a timestamp, None when absent; the wire's zero (1601) means absent too."""
    if stamp is None:
        return None
    aware = stamp if stamp.tzinfo is not None else stamp.replace(tzinfo=UTC)
    if aware <= _WIRE_EPOCH:
        return None
    return ((aware - _UNIX_EPOCH) // _MICROSECOND) * 1000


def writable_type(data_type: object, current: object) -> ua.VariantType | None:
    """Type to write a node as, None when neither its DataType attribute nor, for a subtype, its present value tells.

    Only types that can hold a number or a truth value are of use here.
    """
    candidates: list[object] = []
    if isinstance(data_type, ua.NodeId) and data_type.NamespaceIndex == 0:
        candidates.append(data_type.Identifier)
    if isinstance(current, ua.Variant) and isinstance(current.VariantType, ua.VariantType):
        candidates.append(current.VariantType.value)
    for candidate in candidates:
        for known in (ua.VariantType.Boolean, *INTEGERS, *FLOATS):
            if candidate == known.value:
                return known
    return None


def encode(value: float | bool, wire_type: ua.VariantType) -> ua.DataValue:
    """Encode a finite number or a truth value for a node of this type; fractions round to the nearest integer.

    Raises:
        UnencodableError: the type cannot hold the value.
    """
    truth = isinstance(value, bool | np.bool_)
    if truth != (wire_type is ua.VariantType.Boolean):
        raise UnencodableError(f"{value!r} cannot be written as {wire_type.name}")
    exact: bool | int | float
    if truth:
        exact = bool(value)
    elif wire_type in INTEGERS:
        low, high = INTEGERS[wire_type]
        exact = round(value)
        if not low <= exact <= high:
            raise UnencodableError(f"{value!r} is outside {wire_type.name} ({low} to {high})")
    else:
        exact = float(value)
        if wire_type is ua.VariantType.Float and not _fits_single(exact):
            raise UnencodableError(f"{value!r} is outside {wire_type.name}")
    return ua.DataValue(Value=ua.Variant(exact, wire_type), StatusCode=None)


def _fits_single(value: float) -> bool:
    try:
        return math.isfinite(struct.unpack("<f", struct.pack("<f", value))[0])
    except OverflowError:
        return False


def outcome_of(code: int) -> WriteOutcome:
    """What a status code of a Write says of its value: only a plainly good one was taken (OPC 10000-4, 5.11.4)."""
    match severity(code):
        case Severity.GOOD:
            return WriteOutcome.WRITTEN
        case Severity.UNCERTAIN:
            return WriteOutcome.UNKNOWN
        case Severity.BAD:
            return WriteOutcome.UNKNOWN if code & NAMED in MAYBE_TAKEN else WriteOutcome.REJECTED
