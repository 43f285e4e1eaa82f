"""How mistakes are said."""

import pytest

from gateway.plantfile.lines import Lines, Place
from gateway.plantfile.mistakes import LONGEST_LINE, Ledger, Mistake, PlantFileError, nearest, shown, written


def ledger(text: str = "") -> Ledger:
    """An empty ledger over a text."""
    return Ledger(Lines.of(text))


def test_a_place_is_written_as_a_key_path() -> None:
    """Tables of an array are counted from one, keys with dots keep their quotes."""
    assert written(("sections", 1, "signals", "tank-3.level")) == 'sections[2].signals."tank-3.level"'


def test_a_long_value_is_shortened() -> None:
    """Nobody needs all of it to find it."""
    assert len(shown("x" * 1000)) == 60


def test_a_whole_float_is_shown_as_it_was_written() -> None:
    """40.0 was 40 in the file."""
    assert shown([0.0, 40.5, {"a": 3.0}]) == '[0, 40.5, {"a": 3}]'


@pytest.mark.parametrize(("word", "right"), [("spam", "span"), ("SPAN", "span"), ("zzzz", None)])
def test_the_nearest_spelling(word: str, right: str | None) -> None:
    """Close in letters, whatever their case; nothing rather than anything."""
    assert nearest(word, ["span", "soft", "role"]) == right


def test_a_mistake_says_line_place_value_allowed_and_nearest() -> None:
    """All five on one line when they fit."""
    mistake = Mistake("plant.nmae", 2, '"x"', "name", "name")
    assert str(mistake) == 'line 2 plant.nmae: read "x"; allowed: name; nearest: name'


def test_a_long_mistake_takes_two_lines() -> None:
    """What was read above, what is allowed below."""
    first, second = str(Mistake("plant.name", 2, "5", "a" * LONGEST_LINE)).splitlines()
    assert (first, second.strip()) == ("line 2 plant.name: read 5", "allowed: " + "a" * LONGEST_LINE)


def test_a_mistake_of_the_file_itself_has_no_key() -> None:
    """It is about the file."""
    assert str(Mistake("", None, "nothing", "a file")) == "the file: read nothing; allowed: a file"


def test_the_error_prints_as_one_block() -> None:
    """Name and count above, one mistake a line below."""
    error = PlantFileError("a.toml", (Mistake("b", 1, "2", "3"), Mistake("c", 4, "5", "6")))
    assert str(error).splitlines() == [
        "a.toml: 2 mistakes",
        "  line 1 b: read 2; allowed: 3",
        "  line 4 c: read 5; allowed: 6",
    ]


def test_mistakes_come_in_the_order_of_their_lines() -> None:
    """However they were found."""
    book = ledger("a = 1\nb = 2")
    book.add(("b",), 2, "3")
    book.add(("a",), 1, "3")
    assert [mistake.place for mistake in book.mistakes()] == ["a", "b"]


def test_the_same_mistake_counts_once() -> None:
    """A kind's mistake is not said again for each of its sections."""
    book = ledger()
    book.add(("a",), 1, "2")
    book.add(("a",), 1, "2")
    assert len(book.mistakes()) == 1


def test_a_spoiled_key_is_not_missing_as_well() -> None:
    """Its own mistake says enough, whichever is found first; so does one inside it."""
    book = ledger()
    book.add_missing(("a",), "something")
    book.add(("a", "b"), 1, "2")
    book.add_missing(("a", "b"), "something")
    assert [mistake.place for mistake in book.mistakes()] == ["a.b"]


def test_a_key_missing_beside_a_wrong_one_is_still_said() -> None:
    """A mistake about the table itself explains no missing key in it."""
    book = ledger()
    book.add(("a",), 1, "2")
    book.add_missing(("a", "b"), "something")
    assert [mistake.place for mistake in book.mistakes()] == ["a", "a.b"]


@pytest.mark.parametrize("place", [("a",), ("a", "b"), ("a", "b", "c")])
def test_a_place_is_spoiled_by_a_mistake_at_it_around_it_or_inside_it(place: Place) -> None:
    """And not by one beside it."""
    book = ledger()
    book.add(("a", "b"), 1, "2")
    assert book.spoiled(place)
    assert not book.spoiled(("a", "x"))


def test_a_misspelled_key_is_not_missing_as_well() -> None:
    """`spn` was meant to be `span`."""
    book = ledger()
    book.add_unknown(("a", "spn"), ["span", "soft"])
    book.add_missing(("a", "span"), "a span")
    assert [mistake.suggestion for mistake in book.mistakes()] == ["span"]
