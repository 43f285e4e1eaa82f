"""The figures of a run against numpy and counts made by hand on the records that were journaled."""

from __future__ import annotations

from math import isnan
from pathlib import Path

import numpy as np
import pytest

from gateway.bench.figures import Figures, figures_of
from gateway.bench.story import story_of
from gateway.hold import State
from gateway.journal import JournalReader, Outcome, PeriodRecord, RunEnd
from gateway.signals import Quality
from gateway.verdict import Verdict
from tests.gateway.bench.rig import (
    FIRST_K,
    RUN,
    applied,
    period,
    quiet_period,
    row_plant,
    section_row,
    tanks,
    write_journal,
)

PLANT = row_plant()


def figures(
    path: Path,
    periods: list[PeriodRecord],
    *,
    outcomes: tuple[Outcome, ...] = (),
    how: RunEnd = RunEnd.COMPLETED,
    window_s: float = 30.0,
    told: bool = False,
) -> Figures:
    """Journal these periods and work out their figures."""
    write_journal(path / "journal.sqlite", PLANT, periods, outcomes=outcomes, how=how)
    with JournalReader(path / "journal.sqlite") as reader:
        return figures_of(reader, reader.run(RUN), PLANT, story_of(PLANT) if told else (), window_s)


def test_quantiles_are_those_of_numpy(tmp_path: Path) -> None:
    """Work and slack: numpy's percentiles of the journaled numbers; the bad end of slack is the small one."""
    rng = np.random.default_rng(5)
    work, slack = rng.integers(5_000, 60_000, 137), rng.integers(100_000, 445_000, 137)
    records = [
        period(i, quiet_period(i).sections, total_us=int(w), slack_us=int(s))
        for i, (w, s) in enumerate(zip(work, slack, strict=True))
    ]
    found = figures(tmp_path, records)
    assert found.work_us is not None
    assert found.slack_us is not None
    assert [found.work_us.median, found.work_us.p99, found.work_us.p999, found.work_us.worst] == pytest.approx(
        [*np.percentile(work, [50, 99, 99.9]), work.max()], rel=1e-12
    )
    assert [found.slack_us.median, found.slack_us.p99, found.slack_us.p999, found.slack_us.worst] == pytest.approx(
        [*np.percentile(slack, [50, 1, 0.1]), slack.min()], rel=1e-12
    )


def test_periods_without_a_write_have_no_slack(tmp_path: Path) -> None:
    """Quantiles are over the periods that have the quantity; without any there are none."""
    some = figures(tmp_path, [quiet_period(0), period(1, quiet_period(1).sections, total_us=None, slack_us=None)])
    assert some.slack_us is not None
    assert some.slack_us.periods == 1
    (tmp_path / "other").mkdir()
    none = figures(tmp_path / "other", [period(0, quiet_period(0).sections, total_us=None, slack_us=None)])
    assert none.work_us is none.slack_us is None


def test_the_mean_error_is_that_of_the_last_seconds_in_percent_of_span(tmp_path: Path) -> None:
    """Two of ten seconds far off, the rest one millimetre: a window of four seconds sees only the millimetre."""
    records = [quiet_period(i, 30.0 if i < 4 else 20.1) for i in range(20)]
    found = figures(tmp_path, records, window_s=4.0)
    assert [section.mean_error_percent for section in found.sections] == pytest.approx([0.25] * 3)


def test_errors_follow_a_target_that_was_moved(tmp_path: Path) -> None:
    """From the period in which the request was applied on, errors count from the new target."""
    records = [quiet_period(i, 20.0 if i < 5 else 22.0) for i in range(10)]
    outcomes = (applied("target tank-2.level 22", FIRST_K + 5), applied("target tank-3.level 30", FIRST_K, "refused"))
    found = figures(tmp_path, records, outcomes=outcomes)
    assert found.sections[1].target == 22.0
    assert found.sections[1].mean_error_percent == pytest.approx(0.0)
    assert found.sections[2].target == 20.0
    assert found.sections[2].mean_error_percent == pytest.approx(2.5)


def test_readings_that_are_not_believed_are_no_errors(tmp_path: Path) -> None:
    """A frozen or missing reading neither counts nor is shown as the last value."""
    bad = section_row(35.0, quality=Quality.FROZEN)
    missing = section_row(None, quality=Quality.MISSING)
    records = [quiet_period(0, 21.0), period(1, tanks(bad, missing, section_row(21.0)))]
    found = figures(tmp_path, records)
    assert [section.value for section in found.sections] == [21.0, 21.0, 21.0]
    assert [section.mean_error_percent for section in found.sections] == pytest.approx([2.5] * 3)


def test_a_section_never_seen_has_no_number(tmp_path: Path) -> None:
    """No good reading at all gives no value and no error, not zero."""
    rows = tanks(section_row(None, quality=Quality.MISSING), section_row(20.0), section_row(20.0))
    found = figures(tmp_path, [period(0, rows)])
    assert isnan(found.sections[0].value)
    assert isnan(found.sections[0].mean_error_percent)


def test_states_and_misses_are_counted_per_section(tmp_path: Path) -> None:
    """Periods by state, misses by verdict, and who ends on hold."""
    late = section_row(20.0, state=State.FROZEN, verdict=Verdict.LATE)
    held = section_row(20.0, state=State.HOLDING, verdict=Verdict.BLIND)
    well = section_row(20.0)
    found = figures(tmp_path, [quiet_period(0), period(1, tanks(late, well, well)), period(2, tanks(held, well, well))])
    assert found.sections[0].states == {State.DRIVING: 1, State.FROZEN: 1, State.HOLDING: 1}
    assert found.sections[0].misses == {Verdict.LATE: 1, Verdict.BLIND: 1}
    assert found.sections[1].misses == {}
    assert found.held == ("tank-1",)


def test_only_misses_outside_the_story_are_unprovoked(tmp_path: Path) -> None:
    """The section whose transmitter the story freezes may miss meanwhile; its neighbour may not."""
    blind = section_row(20.0, state=State.FROZEN, verdict=Verdict.BLIND)
    records = [quiet_period(i) for i in range(64)] + [period(64, tanks(blind, blind, section_row(20.0)))]
    found = figures(tmp_path, records, told=True)
    assert [section.unprovoked for section in found.sections] == [1, 0, 0]
    assert found.unprovoked == 1


def test_what_was_written_outside_its_limits_is_counted(tmp_path: Path) -> None:
    """Hard limits are 0 and 100 %: both sides count, the limits themselves and periods without a write do not."""
    rows = tanks(section_row(20.0, written=100.1), section_row(20.0, written=-0.1), section_row(20.0, written=100.0))
    nothing = tanks(*(section_row(20.0, written=float("nan")) for _ in range(3)))
    assert figures(tmp_path, [period(0, rows), period(1, nothing)]).out_of_limits == 2


def test_periods_that_are_missing_are_counted(tmp_path: Path) -> None:
    """A gap between the first and the last period is so many skipped ones."""
    found = figures(tmp_path, [quiet_period(0), quiet_period(1), quiet_period(5)])
    assert (found.periods, found.skipped, found.seconds) == (3, 3, 3.0)


@pytest.mark.parametrize(
    ("how", "expected"),
    [(RunEnd.COMPLETED, True), (RunEnd.STOPPED, True), (RunEnd.HELD, True), (RunEnd.FAILED, False)],
)
def test_only_a_failed_run_did_not_end_in_order(tmp_path: Path, how: RunEnd, expected: bool) -> None:
    """Completed, stopped and held runs ended in order."""
    assert figures(tmp_path, [quiet_period(0)], how=how).ended is expected


def test_a_run_without_periods_has_empty_figures(tmp_path: Path) -> None:
    """A gateway that was stopped before its first period is no reason to fail."""
    found = figures(tmp_path, [])
    assert (found.periods, found.seconds, found.work_us, found.held) == (0, 0.0, None, ())
