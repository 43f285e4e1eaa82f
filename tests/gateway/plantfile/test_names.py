"""Ranges and lists in names."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gateway.plantfile.names import MOST_NAMES, NamePatternError, expand, row_order

WORDS = st.from_regex(r"[A-Za-z0-9_-]{1,8}", fullmatch=True)


@pytest.mark.parametrize(
    ("pattern", "names"),
    [
        ("sump", ("sump",)),
        ("tank-{1..3}", ("tank-1", "tank-2", "tank-3")),
        ("tank-{3,6}", ("tank-3", "tank-6")),
        ("tank-{1..2, 7}", ("tank-1", "tank-2", "tank-7")),
        ("tank-{08..10}", ("tank-08", "tank-09", "tank-10")),
        ("r{1,2}-{a,b}", ("r1-a", "r1-b", "r2-a", "r2-b")),
        ("{4..4}", ("4",)),
    ],
)
def test_a_pattern_gives_its_names_in_order(pattern: str, names: tuple[str, ...]) -> None:
    """Ranges include both ends, lists keep their order, the last braces run fastest, leading zeros stay."""
    assert expand(pattern) == names


@pytest.mark.parametrize(
    "pattern",
    ["", "tank-{1..", "tank-}1{", "tank-{}", "tank-{1..2..3}", "tank 1", "tank.1", "tank-{{1..2}}", "tank-{1,,2}", "ü"],
)
def test_a_broken_pattern_is_refused(pattern: str) -> None:
    """Stray braces, empty items and characters that tags can't carry raise."""
    with pytest.raises(NamePatternError):
        expand(pattern)


def test_a_range_that_runs_down_is_refused_with_the_right_one() -> None:
    """The message turns the range round."""
    with pytest.raises(NamePatternError, match=r"\{1\.\.8\}"):
        expand("tank-{8..1}")


@pytest.mark.parametrize("pattern", ["tank-{1..1000000}", "t{1..200}-{1..200}", "t{1..9000,1..9000}"])
def test_an_absurd_number_of_names_is_refused(pattern: str) -> None:
    """More than MOST_NAMES is taken for a slip, before the names are made."""
    with pytest.raises(NamePatternError, match=str(MOST_NAMES)):
        expand(pattern)


@settings(deadline=None)
@given(stem=WORDS, first=st.integers(0, 500), count=st.integers(1, 60))
def test_a_range_gives_each_number_between_its_ends_once(stem: str, first: int, count: int) -> None:
    """Law: `stem{a..b}` is stem followed by a, a + 1, ..., b."""
    assert expand(f"{stem}{{{first}..{first + count - 1}}}") == tuple(f"{stem}{first + at}" for at in range(count))


@settings(deadline=None)
@given(stem=WORDS, items=st.lists(WORDS, min_size=1, max_size=10))
def test_a_list_gives_its_items_back(stem: str, items: list[str]) -> None:
    """Law: `stem{x,y}` round-trips through its items, repeated ones too."""
    assert expand(f"{stem}{{{','.join(items)}}}") == tuple(stem + item for item in items)


@settings(deadline=None)
@given(name=WORDS)
def test_a_plain_name_is_itself(name: str) -> None:
    """Law: without braces nothing is expanded."""
    assert expand(name) == (name,)


@settings(deadline=None)
@given(data=st.data(), count=st.integers(1, 30))
def test_a_split_row_is_a_row_again(data: st.DataObject, count: int) -> None:
    """Law: however names of one stem are dealt out, they come back in the order of their numbers."""
    row = [f"tank-{number}" for number in range(1, count + 1)]
    dealt = data.draw(st.permutations(row))
    assert [dealt[index] for index in row_order(dealt)] == row


def test_other_names_keep_their_place() -> None:
    """A stem stands where its first name was written; nothing is sorted by letter."""
    names = ["sump", "tank-2", "header", "tank-10", "tank-1"]
    assert [names[index] for index in row_order(names)] == ["sump", "tank-1", "tank-2", "tank-10", "header"]
