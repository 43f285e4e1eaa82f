"""Following a run through its journal: everything once, in order, whenever one looks."""

from __future__ import annotations

from pathlib import Path

from gateway.bench.following import TAIL, Followed, follow, open_when_there, targets_after
from gateway.hold import State
from gateway.journal import JournalReader
from gateway.verdict import Verdict
from tests.gateway.bench.rig import (
    FIRST_K,
    WALL_NS,
    applied,
    period,
    quiet_period,
    row_plant,
    section_row,
    tanks,
    transition,
    write_journal,
)

PLANT = row_plant()


def test_a_journal_that_is_not_there_yet_is_waited_for(tmp_path: Path) -> None:
    """Its writer may not have made it yet: that is no error."""
    assert open_when_there(tmp_path / "journal.sqlite") is None


def test_nothing_is_told_twice(tmp_path: Path) -> None:
    """A second look at an unchanged journal finds no new event and no new answer."""
    events, outcomes = [transition(0.0, "tank-1", State.FROZEN, State.DRIVING)], [applied("hold tank-1", FIRST_K)]
    path = write_journal(tmp_path / "j", PLANT, [quiet_period(0)], events=events, outcomes=outcomes)
    with JournalReader(path) as reader:
        first = follow(reader, Followed())
        second = follow(reader, first)
    assert (len(first.events), len(first.outcomes), first.count) == (1, 1, 1)
    assert (second.events, second.outcomes, second.count) == ((), (), 1)


def test_a_journal_is_followed_while_it_is_written(tmp_path: Path) -> None:
    """What is committed is seen before the run has ended."""
    seen: list[Followed] = []

    def look() -> None:
        with JournalReader(tmp_path / "j") as reader:
            seen.append(follow(reader, Followed()))

    write_journal(tmp_path / "j", PLANT, [quiet_period(i) for i in range(4)], while_open=look)
    assert seen[0].count == 4
    assert seen[0].run is not None
    assert seen[0].run.ended_ns is None


def test_misses_are_summed_over_all_periods_and_only_the_last_ones_kept(tmp_path: Path) -> None:
    """Sums do not forget what the tail does."""
    late = section_row(20.0, state=State.FROZEN, verdict=Verdict.LATE)
    records = [period(0, tanks(late, section_row(20.0), late))] + [quiet_period(i) for i in range(1, TAIL + 10)]
    path = write_journal(tmp_path / "j", PLANT, records)
    with JournalReader(path) as reader:
        found = follow(reader, Followed())
    assert found.misses == (1, 0, 1)
    assert (found.count, len(found.periods)) == (TAIL + 10, TAIL)
    assert found.first_ns == WALL_NS


def test_time_counts_from_the_first_period(tmp_path: Path) -> None:
    """Before it there is no time, and never a negative one."""
    path = write_journal(tmp_path / "j", PLANT, [quiet_period(0)])
    with JournalReader(path) as reader:
        found = follow(reader, Followed())
    assert Followed().since_start_s(WALL_NS) == 0.0
    assert found.since_start_s(WALL_NS + 2_500_000_000) == 2.5
    assert found.since_start_s(WALL_NS - 1) == 0.0


def test_only_applied_targets_change_them() -> None:
    """A refused request, another request and an older target do not."""
    outcomes = (
        applied("target tank-1.level 18.5", 3),
        applied("target tank-2.level 19", 3, "refused"),
        applied("hold tank-2", 4),
        applied("target tank-1.level 21 cm", 9),
    )
    assert targets_after({"tank-3.level": 5.0}, outcomes) == {"tank-3.level": 5.0, "tank-1.level": 21.0}
