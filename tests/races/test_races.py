"""The smallest race runs, everybody reaches the accuracy, and the report says so. No durations are judged here."""

from __future__ import annotations

import json
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from controllers.central import solve_central
from controllers.ending import first_inputs
from controllers.quantities import Of
from tests.races.calibrate import Patience, Retired, calibrate
from tests.races.command import main
from tests.races.contest import Contest
from tests.races.course import Stretch, course
from tests.races.plants import PLANTS
from tests.races.published import BySolver, Explicit, Maps, run
from tests.races.race import WARM_UP, alone, by_racer, enter, judged, race, worst_error
from tests.races.racers import ENTRIES, OURS
from tests.races.racers.protocol import Setup, installed
from tests.races.report import paired
from tests.races.truth import Truth, departure

SIZE, HORIZON, PERIODS, ACCURACY = 6, 8, 6, 1e-3
PATIENT = Patience(period_s=60, tuning_s=60)


@cache
def small(kind: str) -> tuple[Contest, tuple[Stretch, ...]]:
    """A contest and its course."""
    contest = Contest.build(kind, SIZE, HORIZON)
    return contest, course(contest, PERIODS)


@pytest.mark.parametrize("kind", PLANTS)
def test_truth_is_the_optimum_of_the_whole_plant_reference(kind: str) -> None:
    """First inputs of every truth equal those of `controllers.central`, which writes its program differently."""
    contest, stretches = small(kind)
    first = [contest.table.rows_of(q.name).start for q in contest.table.quantities if q.of is Of.INPUT]
    for stretch in stretches:
        reference = solve_central(contest.table, stretch.measured, stretch.data)[first]
        np.testing.assert_allclose(stretch.truth / contest.input_span, reference, rtol=0, atol=1e-6)


def test_departure_sees_what_is_not_optimal() -> None:
    """A wrong dual, a primal outside its limits and one off the dynamics all show."""
    contest, stretches = small("zones")
    program = contest.program
    numbers = program.numbers(stretches[0].measured, stretches[0].data)
    truth = Truth(program, contest.usual)
    v, y = truth._solver.solve(stretches[0].measured, stretches[0].data, numbers)
    assert departure(program, numbers, v, y) < 1e-6
    assert departure(program, numbers, v, y + 0.01) > 1e-3
    assert departure(program, numbers, v + 0.01, y) > 1e-3
    assert departure(program, replace(numbers, upper=numbers.upper - 0.01), v, y) > 1e-3


@pytest.mark.parametrize("kind", PLANTS)
def test_limits_bind_on_the_course(kind: str) -> None:
    """The racers meet problems with active limits, or there would be nothing to race for."""
    contest, stretches = small(kind)
    tight = 0
    for stretch in stretches:
        rows = solve_central(contest.table, stretch.measured, stretch.data)
        tight += int((np.minimum(rows - stretch.data.lower, stretch.data.upper - rows) < 1e-6).sum())
    assert tight > 0


@pytest.mark.parametrize("kind", PLANTS)
@pytest.mark.parametrize("name", ENTRIES)
def test_every_racer_gets_there(name: str, kind: str) -> None:
    """Set tightly, each racer's first inputs are right in every period, cold and warm."""
    entry = ENTRIES[name]
    if not installed(entry):
        pytest.skip(f"{entry.package} is not installed")
    contest, stretches = small(kind)
    laps = alone(contest, enter(contest, entry, Setup(1e-6, entry.tunings[-1])), stretches, PATIENT.period_s)
    assert len(laps) == PERIODS
    assert max(lap.error_spans for lap in laps) <= ACCURACY


def test_calibration_finds_the_loosest_tolerance_that_reaches_the_accuracy() -> None:
    """The setup found reaches it, and the next looser tolerance does not."""
    contest, stretches = small("zones")
    found = calibrate(contest, OURS, stretches, 1e-4, PATIENT)
    assert not isinstance(found, Retired)
    best = found[0].setup
    looser = replace(best, tolerance=OURS.tolerances[OURS.tolerances.index(best.tolerance) - 1])
    errors = [
        worst_error(alone(contest, enter(contest, OURS, setup), stretches, PATIENT.period_s))
        for setup in (best, looser)
    ]
    assert errors[0] <= 1e-4 < errors[1]


def test_a_race_is_paired() -> None:
    """Every racer runs every period of every repeat; the warm-up is not judged; ratios pair equal periods."""
    contest, stretches = small("zones")
    entrants = [enter(contest, ENTRIES[name], Setup(1e-4, ENTRIES[name].tunings[0])) for name in (OURS.name, "OSQP")]
    laps = by_racer(race(contest, entrants, stretches, 3))
    expected = {(repeat, period) for repeat in range(3) for period in range(WARM_UP, PERIODS)}
    for made in laps.values():
        assert {(lap.repeat, lap.period) for lap in made} == expected
    assert judged(laps["OSQP"]) == laps["OSQP"]
    longer = [replace(lap, duration_s=3 * lap.duration_s) for lap in reversed(laps[OURS.name])]
    assert paired(longer, laps[OURS.name]) == pytest.approx([3.0] * len(expected))


@pytest.mark.parametrize("kind", PLANTS)
def test_published_form_finds_the_same_inputs(kind: str) -> None:
    """The unscaled row and column form converges to the truth, and a solver does its rows as the closed form does."""
    contest, stretches = small(kind)
    stretch, design = stretches[0], contest.design
    maps, weighted = Maps.build(design), design._weighted(stretch.data)
    value = maps.values(stretch.measured)
    explicit = Explicit(maps, value, weighted, 1.0, limited=True)
    rows, _ = run(maps, value, explicit, 1500)
    inputs, _ = first_inputs(design.table, rows / np.sqrt(design.table.weight), stretch.data)
    assert contest.error_spans(inputs, stretch.truth) <= 1e-2
    copy = np.random.default_rng(0).normal(size=len(value))
    np.testing.assert_allclose(BySolver(maps, value, weighted, 1.0)(copy), explicit(copy), rtol=0, atol=1e-5)


def test_the_command_writes_table_picture_and_numbers(tmp_path: Path) -> None:
    """One small race through the command line; the table has a line for each racer, the numbers one for each lap."""
    options = "--kinds zones --sizes 6 --horizons 8 --periods 6 --repeats 2 --racers OSQP,Clarabel --accuracies 1e-2"
    result = CliRunner().invoke(main, [str(tmp_path), *options.split()], catch_exceptions=False)
    assert result.exit_code == 0, result.output
    table = (tmp_path / "races.md").read_text()
    for name in (OURS.name, "OSQP", "Clarabel"):
        assert f"| zones | 6 | 8 | {name} |" in table
    for heading in ("## What explicit rows cost", "## One section alone", "## The published unscaled form"):
        assert heading in table
    (case,) = json.loads((tmp_path / "races.json").read_text())
    assert len(case["laps"]) == 3 * 2 * (6 - WARM_UP)
    assert max(lap["error_spans"] for lap in case["laps"]) <= 1e-2
    assert (tmp_path / "races-T8-0.01.png").stat().st_size > 10_000
