"""Values between the wire and Python, without a wire."""

from __future__ import annotations

import math
import struct
from datetime import UTC, datetime
from typing import Any

import numpy as np
import pytest
from asyncua import ua
from asyncua.ua.status_codes import StatusCodes
from asyncua.ua.ua_binary import struct_to_binary
from hypothesis import given
from hypothesis import strategies as st

from gateway.links.opcua_addresses import node_id
from gateway.links.opcua_values import (
    FLOATS,
    INTEGERS,
    UnencodableError,
    encode,
    outcome_of,
    plain,
    reading,
    unix_ns,
    writable_type,
)
from gateway.links.protocol import WriteOutcome
from gateway.signals import Reading


class Unprintable:
    """A structure that breaks whoever prints it."""

    def __str__(self) -> str:
        """Fail."""
        raise RuntimeError("no text")


def test_an_answer_without_anything_is_a_good_nothing() -> None:
    """Absent value, status and timestamps neither raise nor become numbers."""
    answer = ua.DataValue(StatusCode=None)
    assert reading(answer) == Reading(value=None, status=0, source_ns=None, server_ns=None)


def test_plain_unwraps_nested_library_types() -> None:
    """Variants inside arrays and enumerations come out as what they hold."""
    wrapped = [ua.Variant(1.5), ua.Variant(ua.ServerState.Test), (ua.LocalizedText(None), datetime(2026, 1, 2))]
    assert plain(wrapped) == [1.5, 5, ["", "2026-01-02T00:00:00"]]


def test_plain_survives_what_cannot_be_printed() -> None:
    """Even a structure whose text fails becomes a value."""
    assert plain(Unprintable()) == "<Unprintable>"


@pytest.mark.parametrize(
    ("stamp", "expected"),
    [
        (None, None),
        (datetime(1601, 1, 1, tzinfo=UTC), None),
        (datetime(1970, 1, 1, tzinfo=UTC), 0),
        (datetime(1970, 1, 1, 0, 0, 1, 7), 1_000_007_000),
        (datetime(1969, 12, 31, 23, 59, 59, tzinfo=UTC), -1_000_000_000),
        (datetime(9999, 12, 31, 23, 59, 59, tzinfo=UTC), 253_402_300_799_000_000_000),
    ],
)
def test_unix_nanoseconds_of_a_timestamp(stamp: datetime | None, expected: int | None) -> None:
    """Exact to the microsecond, without a time zone taken as UTC, the wire's zero taken as absent."""
    assert unix_ns(stamp) == expected


@pytest.mark.parametrize("wire_type", INTEGERS)
def test_integers_are_held_up_to_their_range_and_no_further(wire_type: ua.VariantType) -> None:
    """Both ends of the range encode and survive the binary encoding; one beyond does not."""
    for end, beyond in zip(INTEGERS[wire_type], (-1, 1), strict=True):
        encoded = encode(end, wire_type)
        assert encoded.Value is not None
        assert encoded.Value.Value == end
        assert struct_to_binary(encoded)
        with pytest.raises(UnencodableError, match=wire_type.name):
            encode(end + beyond, wire_type)


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_double_keeps_every_finite_float(value: float) -> None:
    """Nothing is lost on the way to a Double."""
    encoded = encode(value, ua.VariantType.Double)
    assert encoded.Value is not None
    assert encoded.Value.Value == value


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_single_is_refused_exactly_when_it_would_overflow(value: float) -> None:
    """A Float node never gets an infinity out of a finite number."""
    largest = struct.unpack("<f", b"\xff\xff\x7f\x7f")[0]
    if abs(value) <= largest:
        binary = struct_to_binary(encode(value, ua.VariantType.Float))
        assert math.isfinite(struct.unpack("<f", binary[-4:])[0])
    elif abs(value) > largest * (1 + 2**-24):
        with pytest.raises(UnencodableError, match="Float"):
            encode(value, ua.VariantType.Float)


@pytest.mark.parametrize(
    ("value", "wire_type"),
    [(True, ua.VariantType.Double), (1, ua.VariantType.Boolean), (np.True_, ua.VariantType.UInt32)],
)
def test_truth_values_and_numbers_are_not_mixed(value: Any, wire_type: ua.VariantType) -> None:
    """True is not 1 on a wire."""
    with pytest.raises(UnencodableError, match=wire_type.name):
        encode(value, wire_type)


@pytest.mark.parametrize(
    ("value", "wire_type", "expected"),
    [
        (np.float64(1.25), ua.VariantType.Double, 1.25),
        (np.int64(3), ua.VariantType.UInt32, 3),
        (np.float32(2.6), ua.VariantType.Int16, 3),
        (np.True_, ua.VariantType.Boolean, True),
    ],
)
def test_numpy_scalars_encode_like_python_numbers(value: Any, wire_type: ua.VariantType, expected: object) -> None:
    """What the numerics hand over needs no conversion by the caller."""
    encoded = encode(value, wire_type)
    assert encoded.Value is not None
    assert encoded.Value.Value == expected
    assert type(encoded.Value.Value) is type(expected)
    assert struct_to_binary(encoded)


@pytest.mark.parametrize("wire_type", [*FLOATS, *INTEGERS])
def test_an_encoded_value_carries_a_value_and_nothing_else(wire_type: ua.VariantType) -> None:
    """The encoding mask has the bit of the value alone (OPC 10000-6, 5.2.2.17)."""
    assert struct_to_binary(encode(1, wire_type))[0] == 0x01


@pytest.mark.parametrize(
    ("data_type", "current", "expected"),
    [
        (node_id(11), None, ua.VariantType.Double),
        (node_id(7), ua.Variant(1.0, ua.VariantType.Double), ua.VariantType.UInt32),
        (node_id(26), ua.Variant(1.0, ua.VariantType.Float), ua.VariantType.Float),
        (node_id(290), ua.Variant(1.0, ua.VariantType.Double), ua.VariantType.Double),
        (node_id(11, 2), ua.Variant(1, ua.VariantType.Int32), ua.VariantType.Int32),
        (node_id(26), ua.Variant(), None),
        (node_id(12), ua.Variant("x"), None),
        (None, None, None),
    ],
)
def test_type_to_write_as(data_type: object, current: object, expected: ua.VariantType | None) -> None:
    """Built-in types speak for themselves, subtypes through the present value; text is nothing to write a number to."""
    assert writable_type(data_type, current) is expected


@pytest.mark.parametrize(
    ("code", "outcome"),
    [
        ("Good", WriteOutcome.WRITTEN),
        ("GoodClamped", WriteOutcome.WRITTEN),
        ("Uncertain", WriteOutcome.UNKNOWN),
        ("BadOutOfRange", WriteOutcome.REJECTED),
        ("BadNotWritable", WriteOutcome.REJECTED),
        ("BadTimeout", WriteOutcome.UNKNOWN),
        ("BadCommunicationError", WriteOutcome.UNKNOWN),
    ],
)
def test_outcome_of_a_status(code: str, outcome: WriteOutcome) -> None:
    """Only a plainly good status was taken; what the server lost sight of may still be taken."""
    assert outcome_of(getattr(StatusCodes, code)) is outcome
