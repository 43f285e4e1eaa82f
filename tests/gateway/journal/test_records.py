"""Tests of `gateway.journal.records`."""

from dataclasses import dataclass

import pytest

from gateway.journal.records import MAX_TEXT, Event, RunEnd, SignalRow, new_run_id
from gateway.sentences import permit
from gateway.signals import Quality, Reading
from tests.gateway.journal.samples import LAYOUT, WALL_NS


@dataclass(frozen=True)
class Foreign:
    """A type no signal has."""

    number: int = 3


def test_a_run_id_reads_as_its_start_in_utc() -> None:
    """The identifier sorts by time and says when the run began."""
    assert new_run_id(WALL_NS, "7f3a") == "20250102-030000-7f3a"


@pytest.mark.parametrize("value", [1.5, -0.0, 7, True, None, "text"])
def test_plain_values_are_kept_as_they_came(value: object) -> None:
    """A value a signal can have keeps its type and itself."""
    kept = SignalRow.of(Reading(value), Quality.GOOD).value
    assert kept == value
    assert type(kept) is type(value)


def test_a_foreign_type_becomes_text() -> None:
    """What no signal can have is recorded as its repr, not refused."""
    assert SignalRow.of(Reading(Foreign()), Quality.BAD).value == "Foreign(number=3)"


def test_an_integer_beyond_64_bits_becomes_text() -> None:
    """A number the file format cannot hold is recorded as text, not refused."""
    assert SignalRow.of(Reading(2**70), Quality.BAD).value == str(2**70)


@pytest.mark.parametrize("value", ["x" * 10_000, b"x" * 10_000, list(range(10_000))])
def test_long_values_are_cut(value: object) -> None:
    """A peer cannot fill the disk with one value."""
    kept = SignalRow.of(Reading(value), Quality.BAD).value
    assert isinstance(kept, str)
    assert len(kept) == MAX_TEXT


def test_a_section_is_found_by_name() -> None:
    """The layout says where a section's row stands."""
    assert LAYOUT.place("tank-2") == 1


def test_an_unknown_section_is_an_error() -> None:
    """A name the run does not have is not silently somebody else's row."""
    with pytest.raises(KeyError, match="tank-9"):
        LAYOUT.place("tank-9")


def test_only_a_failure_is_an_unclean_end() -> None:
    """A run that was completed or stopped lets the next one start as if nothing had happened."""
    assert [how for how in RunEnd if not how.clean] == [RunEnd.HELD, RunEnd.FAILED]


def test_an_event_of_a_notice_says_the_same() -> None:
    """Log and journal share sentence, kind and facts."""
    notice = permit(on=False)
    event = Event.of(notice, WALL_NS, k=12)
    assert (event.kind, event.sentence, event.detail) == ("permit", notice.sentence, {"on": False})
    assert (event.wall_ns, event.k, event.section) == (WALL_NS, 12, None)
