"""The story's table: laws that hold for every plant, and what it says for three tanks."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.bench.story import Step, Times, excused, story_of
from gateway.plantfile import read_plant
from gateway.plantfile.plant import HoldSpec, Plant, Role
from gateway.requests import SetTarget, parse_request
from sim_plant.faults import parse
from tests.gateway.bench.rig import row_plant

TARN_ROW = Path(__file__).parents[3] / "deploy" / "tarn-row.toml"

PLANTS = st.builds(
    lambda count, period_s, latch, clear, blind: replace(
        row_plant(count),
        period_s=period_s,
        hold=HoldSpec(latch_after=latch, latch_window=max(20, latch), clear_for=clear, blind_after=blind),
    ),
    count=st.integers(2, 6),
    period_s=st.floats(0.02, 30.0),
    latch=st.integers(1, 12),
    clear=st.integers(0, 30),
    blind=st.integers(1, 5),
)


def step(steps: tuple[Step, ...], name: str) -> Step:
    """The step of this name."""
    (found,) = [one for one in steps if one.name == name]
    return found


@given(PLANTS)
def test_steps_come_in_order_and_within_the_time(plant: Plant) -> None:
    """Every step has its time, none is before the last, and only the release is left for after the story's end."""
    steps, end_s = story_of(plant), Times.of(plant).end
    assert [one.at_s for one in steps] == sorted(one.at_s for one in steps)
    assert [one.name for one in steps if one.at_s >= end_s] == ["consumers released"]


@given(PLANTS)
def test_every_line_is_one_the_simulated_plant_understands(plant: Plant) -> None:
    """Lines to the plant parse, and name signals the plant has."""
    tags = {signal.tag for section in plant.sections for signal in section.signals}
    for one in story_of(plant):
        for line in one.provoke:
            assert parse(line).signal in tags


@given(PLANTS)
def test_every_request_is_one_the_gateway_understands(plant: Plant) -> None:
    """Requests parse against the plant they are made to."""
    for one in story_of(plant):
        if one.ask:
            parse_request(one.ask, plant)


@given(PLANTS)
def test_slow_syntheses_never_latch_a_hold(plant: Plant) -> None:
    """So many slow syntheses in a row as are asked for stay below the number that latches."""
    for one in story_of(plant):
        if one.ask.startswith("rehearse slow"):
            assert 1 <= int(one.ask.split()[-1]) <= min(3, plant.hold.latch_after - 1)


@given(PLANTS)
def test_a_hold_has_time_to_latch_and_the_rearm_time_to_be_accepted(plant: Plant) -> None:
    """Between freeze, mending and rearm lie as many periods as the hold table wants."""
    times, hold = Times.of(plant), plant.hold
    assert times.mend - times.freeze >= (hold.latch_after + hold.blind_after) * plant.period_s
    assert times.rearm - times.mend >= hold.clear_for * plant.period_s


@given(PLANTS)
def test_a_new_target_is_another_one_inside_the_soft_band(plant: Plant) -> None:
    """The target moves, and not to where the plant file does not want it."""
    request = parse_request(step(story_of(plant), "target change").ask, plant)
    assert isinstance(request, SetTarget)
    assert 4.0 <= request.value <= 36.0
    assert request.value != 20.0


def test_a_target_at_the_upper_end_moves_down() -> None:
    """Where there is no room above, the target is lowered."""
    plant = row_plant()
    high = replace(
        plant,
        sections=tuple(
            replace(
                section,
                signals=tuple(replace(s, target=35.0) if s.role is Role.MEASURED else s for s in section.signals),
            )
            for section in plant.sections
        ),
    )
    assert step(story_of(high), "target change").ask == "target tank-2.level 33"


def test_the_transmitter_that_freezes_is_next_to_the_consumer() -> None:
    """The first tank's consumer opens, the second tank's transmitter freezes, and that section is rearmed."""
    steps = story_of(row_plant())
    assert step(steps, "consumer opens").provoke == ("set tank-1.consumer 8",)
    assert step(steps, "transmitter freezes").provoke == ("freeze tank-2.level",)
    assert step(steps, "transmitter mended").provoke == ("clear tank-2.level",)
    assert step(steps, "rearm").ask == "rearm tank-2"


def test_all_consumers_are_shut_at_first() -> None:
    """The story is the same every time: no consumer opens by its own profile while it is told."""
    assert story_of(row_plant())[0].provoke == ("set tank-1.consumer 0", "set tank-2.consumer 0")


def test_a_quiet_story_breaks_nothing() -> None:
    """Quiet leaves the plant alone: not one line goes to it."""
    steps = story_of(row_plant(), quiet=True)
    assert [one.name for one in steps] == ["settle", "target change"]
    assert not any(one.provoke for one in steps)


def test_what_a_plant_lacks_is_left_out() -> None:
    """Without consumers, targets and measured signals only the slow syntheses are left to tell."""
    plant = row_plant()
    bare = replace(
        plant,
        sections=tuple(replace(section, signals=section.signals_of(Role.DRIVEN)) for section in plant.sections),
    )
    assert [one.name for one in story_of(bare)] == ["settle", "slow synthesis"]


def test_no_slow_synthesis_where_one_would_latch() -> None:
    """A plant that latches at the first miss is spared."""
    plant = replace(row_plant(), hold=replace(row_plant().hold, latch_after=1))
    assert "slow synthesis" not in [one.name for one in story_of(plant)]


def test_tarn_row_takes_a_minute() -> None:
    """The demo plant's story: one minute, tank 3's consumer, tank 4's transmitter."""
    plant = read_plant(TARN_ROW)
    assert Times.of(plant).end == pytest.approx(60.0)
    assert step(story_of(plant), "consumer opens").provoke == ("set tank-3.consumer 8",)
    assert step(story_of(plant), "transmitter freezes").provoke == ("freeze tank-4.level",)


@pytest.mark.parametrize(
    ("section", "at_s", "expected"),
    [
        ("tank-2", 29.9, False),
        ("tank-2", 30.0, True),
        ("tank-2", 40.0, True),
        ("tank-2", 46.1, False),
        ("tank-1", 40.0, False),
        ("tank-1", 51.5, True),
    ],
)
def test_misses_are_excused_where_and_while_the_story_disturbs(section: str, at_s: float, expected: bool) -> None:
    """A frozen transmitter excuses its own section until the rearm, a slow synthesis everybody for a moment."""
    assert excused(story_of(row_plant()), section, at_s) is expected
