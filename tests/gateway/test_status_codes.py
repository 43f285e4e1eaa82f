"""Severity and name of a status code, from its bits alone."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.status_codes import Severity, name, severity

codes = st.integers(0, 0xFFFF_FFFF)


@given(codes)
def test_every_code_has_a_severity(code: int) -> None:
    """All 32-bit numbers are judged, and the judgement never gets better with the code."""
    order = [Severity.GOOD, Severity.UNCERTAIN, Severity.BAD]
    assert order.index(severity(code)) == min(code // 2**30, 2)


@given(codes)
def test_information_bits_never_change_severity_or_a_known_name(code: int) -> None:
    """Limits, overflow and changed structure say nothing about the quality or the cause."""
    bare = code & 0xFFFF_0000
    assert severity(code) is severity(bare)
    if "(" not in name(bare):
        assert name(code) == name(bare)


@pytest.mark.parametrize(
    ("code", "expected"),
    [
        (0, "Good"),
        (0x0000_0480, "Good"),
        (0x80340000, "BadNodeIdUnknown"),
        (0x8034_0400, "BadNodeIdUnknown"),
        (0x4FFF_0000, "Uncertain (0x4FFF0000)"),
        (0xC000_0001, "Bad (0xC0000001)"),
    ],
)
def test_name_of_a_code(code: int, expected: str) -> None:
    """The table's name without the information bits, otherwise severity and number."""
    assert name(code) == expected


@pytest.mark.parametrize("code", [-1, 2**32])
def test_what_is_no_status_code_is_refused(code: int) -> None:
    """More than 32 bits means that somebody mixed something up."""
    with pytest.raises(ValueError, match="does not fit 32 bits"):
        severity(code)
    with pytest.raises(ValueError, match="does not fit 32 bits"):
        name(code)
