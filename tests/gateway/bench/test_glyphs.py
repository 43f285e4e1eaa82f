"""Marks of the view: where a reading and a target stand on their scale, and that any terminal can show them."""

from __future__ import annotations

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.bench.glyphs import ASCII, UNICODE, Glyphs, glyphs_for, scale, strip
from gateway.plantfile.plant import Role
from tests.gateway.bench.rig import row_plant

LEVEL = row_plant().signals(Role.MEASURED)[0]


@pytest.mark.parametrize(
    ("encoding", "glyphs"), [("utf-8", UNICODE), ("ascii", ASCII), ("latin-1", ASCII), ("no such thing", ASCII)]
)
def test_marks_are_those_the_terminal_can_carry(encoding: str, glyphs: Glyphs) -> None:
    """A terminal without them gets letters, never an error."""
    assert glyphs_for(encoding) is glyphs


def test_every_mark_of_the_plain_set_is_ascii() -> None:
    """The plain set can be shown anywhere."""
    "".join((ASCII.reading, ASCII.target, ASCII.both, ASCII.soft, ASCII.outside, ASCII.heights)).encode("ascii")


def test_a_scale_marks_band_target_and_reading() -> None:
    """Eight cells of 5 cm: soft band 4..36 cm dotted, target 20 cm in the fifth, reading 7 cm in the second."""
    assert scale(LEVEL, 7.0, 20.0, 8, ASCII) == " o..|.. "
    narrow = replace(LEVEL, soft=(10.0, 30.0))
    assert scale(narrow, 7.0, 20.0, 8, ASCII) == " o..|.  "


def test_a_reading_on_its_target_is_one_mark() -> None:
    """Both in one cell give a mark of their own."""
    assert scale(LEVEL, 20.1, 20.0, 9, ASCII) == " ...O... "


def test_no_reading_no_mark() -> None:
    """A reading that is not believed is not drawn anywhere."""
    assert scale(LEVEL, None, 20.0, 8, ASCII) == " ...|.. "
    assert scale(LEVEL, float("nan"), None, 8, ASCII) == " ...... "


@given(st.floats(-100, 200), st.integers(1, 60))
def test_a_scale_is_as_wide_as_asked_and_has_the_reading_once(reading: float, width: int) -> None:
    """Also far outside the span: then it stands at the end."""
    drawn = scale(LEVEL, reading, None, width, ASCII)
    assert len(drawn) == width
    assert drawn.count("o") == 1


def test_the_strip_grows_with_the_share_and_is_full_at_one() -> None:
    """Nothing is shown lower than the first height, nothing higher than full; what is missing is a question mark."""
    assert strip([0.001, 0.5, 1.0, 7.0, None], UNICODE) == "▁▄██?"
