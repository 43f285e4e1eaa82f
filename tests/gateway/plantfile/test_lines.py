"""Finding the line of a key."""

import json
import tomllib

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gateway.plantfile.lines import Lines, Place

TEXT = '''\
# a comment with [brackets] and = signs
title = "x"   # "quoted" # twice
[plant]
name = "a # b"
nested = { one = 1, "two.three" = { four = 4 } }
a.b.c = 3

[kinds.tank.signals.level]
span = [
  0,   # low
  40,
]
text = """
[not.a.header]
key = "no key" ""\\"
"""
raw = \'\'\'[[neither]]\'\'\'
[[sections]]
names = "one"
[[sections]]
names = "two"
[sections.signals."con sumer"]
role = 'x'
[[couplings]]
[couplings.deep]
bore = 1.5e-3
when = 1979-05-27 07:32:00
'''


@pytest.mark.parametrize(
    ("place", "line"),
    [
        (("title",), 2),
        (("plant",), 3),
        (("plant", "name"), 4),
        (("plant", "nested", "one"), 5),
        (("plant", "nested", "two.three", "four"), 5),
        (("plant", "a", "b", "c"), 6),
        (("kinds", "tank", "signals", "level"), 8),
        (("kinds", "tank", "signals", "level", "span"), 9),
        (("kinds", "tank", "signals", "level", "span", 0), 10),
        (("kinds", "tank", "signals", "level", "span", 1), 11),
        (("kinds", "tank", "signals", "level", "raw"), 17),
        (("sections", 0), 18),
        (("sections", 0, "names"), 19),
        (("sections", 1, "names"), 21),
        (("sections", 1, "signals", "con sumer", "role"), 23),
        (("couplings", 0, "deep", "bore"), 26),
        (("couplings", 0, "deep", "when"), 27),
    ],
)
def test_a_key_is_found_on_its_line(place: Place, line: int) -> None:
    """Headers, arrays of tables, inline tables, dotted and quoted keys, values over several lines."""
    tomllib.loads(TEXT)
    assert Lines.of(TEXT).line_of(place) == line


def test_a_missing_key_leads_to_the_table_it_belongs_to() -> None:
    """The nearest table around it stands in."""
    assert Lines.of(TEXT).line_of(("sections", 1, "kind")) == 20


def test_a_missing_table_has_no_line() -> None:
    """Nothing around it but the file."""
    assert Lines.of(TEXT).line_of(("controller",)) is None


def test_lines_end_in_either_way() -> None:
    """A file from another system has the same lines."""
    assert Lines.of(TEXT.replace("\n", "\r\n")).line_of(("couplings", 0, "deep", "bore")) == 26


KEYS = st.one_of(st.from_regex(r"[A-Za-z0-9_-]{1,6}", fullmatch=True), st.text(min_size=1, max_size=5))
VALUES = st.one_of(
    st.integers(-(10**9), 10**9),
    st.booleans(),
    st.floats(allow_nan=False, allow_infinity=False),
    st.text(max_size=8),
    st.lists(st.integers(0, 9), max_size=3),
    st.dictionaries(st.sampled_from("xyz"), st.text(max_size=4), max_size=3),
)


def toml_value(value: object) -> str:
    """Write a value in one line of TOML."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{key} = {toml_value(item)}" for key, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(toml_value(item) for item in value) + "]"
    return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")


@settings(deadline=None)
@given(tables=st.lists(st.dictionaries(KEYS, VALUES, max_size=4), min_size=1, max_size=4))
def test_every_key_of_any_document_is_found(tables: list[dict[str, object]]) -> None:
    """Law: writing one pair a line and counting gives the same lines, whatever keys and values hold."""
    lines: list[str] = []
    expected: dict[Place, int] = {}
    for index, table in enumerate(tables):
        lines.append("[[tables]]")
        expected["tables", index] = len(lines)
        for key, value in table.items():
            lines.append(f"{toml_value(key)} = {toml_value(value)}")
            expected["tables", index, key] = len(lines)
    text = "\n".join(lines)
    tomllib.loads(text)
    found = Lines.of(text)
    assert {place: found.line_of(place) for place in expected} == expected
