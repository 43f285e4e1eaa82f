"""Tests of `gateway.admit`."""

from dataclasses import replace
from math import inf, isfinite, nan

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.admit import Admission, AdmitMemory, Admitted, admit, first_memory, number
from gateway.admit_rules import AdmitPlan, plan_admission
from gateway.signals import MISSING, Quality, Reading
from tests.gateway.plants import row_of_tanks

BAD_STATUS, UNCERTAIN_STATUS, RESERVED_STATUS = 0x80000000, 0x40000000, 0xC0000000


class Feed:
    """Hands readings of one plant to the admission, period by period."""

    def __init__(self, plan: AdmitPlan) -> None:
        self.plan = plan
        self.memory: AdmitMemory = first_memory(plan)
        self.k = 1000
        self.clock_ms = 5000

    def __call__(
        self, *readings: object, clock_runs: bool = True, server_ns: int | None = None, skip: int = 0
    ) -> Admission:
        """Judge one period; plain values are wrapped, signals without a value did not arrive."""
        self.k += 1 + skip
        self.clock_ms += 500 if clock_runs else 0
        wrapped = [one if isinstance(one, Reading) else Reading(one, server_ns=server_ns) for one in readings]
        tags = [rule.tag for rule in self.plan.rules]
        admission, self.memory = admit(
            self.plan, self.memory, self.k, dict(zip(tags, wrapped, strict=False)), self.clock_ms
        )
        return admission


def one_tank(*, noise: float = 0.02, resolution: float = 0.005) -> Feed:
    """One level transmitter."""
    return Feed(plan_admission(row_of_tanks(1, noise=noise, resolution=resolution)))


def first(admission: Admission) -> Admitted:
    """The first signal's judgement."""
    return admission.signals[0]


def noisy(rng: np.random.Generator, level: float, resolution: float = 0.005, noise: float = 0.02) -> float:
    """One reading of a living transmitter."""
    value = level + rng.normal() * noise
    return float(np.round(value / resolution) * resolution) if resolution else float(value)


def test_a_plain_value_is_good() -> None:
    """A finite number in range with a good status is admitted at once, the first one too."""
    admission = one_tank()(20.0)
    assert first(admission) == Admitted("tank-1.level", 20.0, Quality.GOOD, 0)
    assert admission.blind == frozenset()


@pytest.mark.parametrize("value", [20, np.float32(20), np.float64(20), np.int16(20)])
def test_every_number_type_is_a_number(value: object) -> None:
    """Integers and the fixed-size numbers of array libraries are admitted as floats."""
    judged = first(one_tank()(value))
    assert (judged.value, type(judged.value), judged.quality) == (20.0, float, Quality.GOOD)


@pytest.mark.parametrize(
    "value", [None, True, False, np.True_, "20.0", "", b"20", [], [20.0], (20.0,), {}, np.array(20.0), np.zeros(3), 2j]
)
def test_everything_else_is_bad(value: object) -> None:
    """Empty and wrong-typed values are bad, never an exception and never a number by courtesy."""
    judged = first(one_tank()(value))
    assert (judged.value, judged.quality, judged.unusable) == (None, Quality.BAD, 1)


@pytest.mark.parametrize("value", [nan, inf, -inf, np.nan, 10**400])
def test_a_number_that_is_not_finite_says_so(value: object) -> None:
    """NaN, infinities and integers beyond every float are not finite."""
    assert first(one_tank()(value)).quality is Quality.NOT_FINITE


def test_what_did_not_arrive_is_missing() -> None:
    """An absent tag and the reading that stands for one are missing."""
    assert first(one_tank()()).quality is Quality.MISSING
    assert first(one_tank()(MISSING)).quality is Quality.MISSING


def test_an_empty_value_that_did_arrive_is_bad() -> None:
    """A drop-out the peer reports is the peer's, not the link's."""
    assert first(one_tank()(Reading(None, BAD_STATUS, server_ns=1))).quality is Quality.BAD


@pytest.mark.parametrize(
    ("status", "quality"),
    [
        (0, Quality.GOOD),
        (0x00000480, Quality.GOOD),
        (UNCERTAIN_STATUS, Quality.UNCERTAIN),
        (BAD_STATUS, Quality.BAD),
        (RESERVED_STATUS, Quality.BAD),
        (-1, Quality.BAD),
        (1 << 40, Quality.BAD),
    ],
)
def test_severity_decides(status: int, quality: Quality) -> None:
    """Good, uncertain, bad by the top two bits; the reserved severity and what is no status code are bad."""
    judged = first(one_tank()(Reading(20.0, status)))
    assert (judged.quality, judged.value) == (quality, 20.0 if quality.usable else None)


@pytest.mark.parametrize(("value", "inside"), [(-0.5, True), (-0.51, False), (41.25, True), (41.26, False)])
def test_range_is_the_span_with_its_margins(value: float, inside: bool) -> None:
    """A reading a little outside the span is still a measurement, beyond that a failure signal."""
    assert (first(one_tank()(value)).quality is Quality.OUT_OF_RANGE) is not inside


def test_a_jump_is_not_believed() -> None:
    """8 cm in half a second is more than 4 cm/s allow."""
    feed = one_tank()
    feed(20.0)
    assert first(feed(28.0)).quality is Quality.JUMPED
    assert first(feed(20.1)).quality is Quality.GOOD


def test_a_jump_that_persists_is_believed_after_its_section_went_blind() -> None:
    """The new level is admitted at the fifth reading; the third already made the section blind."""
    feed = one_tank()
    feed(20.0)
    admissions = [feed(28.0 + 0.01 * step) for step in range(5)]
    assert [first(one).quality for one in admissions] == [Quality.JUMPED] * 4 + [Quality.GOOD]
    assert [bool(one.blind) for one in admissions] == [False, False, True, True, False]


def test_a_jump_that_keeps_jumping_is_never_believed() -> None:
    """Values that disagree with each other do not add up to a new level."""
    feed = one_tank()
    feed(20.0)
    qualities = {first(feed(28.0 if step % 2 else 10.0)).quality for step in range(20)}
    assert qualities == {Quality.JUMPED}


def test_a_level_may_have_moved_while_nobody_looked() -> None:
    """After six periods without a value, 12 cm are within 4 cm/s."""
    feed = one_tank()
    feed(20.0)
    for _ in range(5):
        feed()
    assert first(feed(31.9)).quality is Quality.GOOD


def test_periods_that_did_not_run_count_as_time() -> None:
    """The allowance follows the period index, not the number of calls."""
    feed = one_tank()
    feed(20.0)
    assert first(feed(31.9, skip=5)).quality is Quality.GOOD


def test_without_a_jump_rate_nothing_jumps() -> None:
    """A signal without `jump` in the plant file may move as it likes."""
    feed = Feed(plan_admission(row_of_tanks(2)))
    feed(20.0, 20.0, 0.0)
    assert feed(20.1, 20.1, 20.0).signals[2].quality is Quality.GOOD


def test_a_freeze_is_noticed_at_the_reading_the_formula_names() -> None:
    """Tarn Row: the eighth equal reading is frozen, the seventh is not yet."""
    feed, rng = one_tank(), np.random.default_rng(1)
    last = 0.0
    for _ in range(200):
        last = noisy(rng, 20.0)
        feed(last)
    qualities = [first(feed(last)).quality for _ in range(9)]
    assert qualities == [Quality.GOOD] * 6 + [Quality.FROZEN] * 3


def test_a_proven_freeze_blinds_at_once() -> None:
    """The repeats that were believed count in arrears, so the section is blind in the period of the proof."""
    feed, rng = one_tank(), np.random.default_rng(1)
    last = 0.0
    for _ in range(200):
        last = noisy(rng, 20.0)
        feed(last)
    admissions = [feed(last) for _ in range(7)]
    assert [bool(one.blind) for one in admissions] == [False] * 6 + [True]
    assert first(admissions[-1]).unusable == 7


def test_a_freeze_ends_with_the_first_change() -> None:
    """As soon as the transmitter moves again it is admitted again."""
    feed = one_tank(resolution=0.0)
    for value in (20.0, 20.01, 20.013, 20.0131, *[20.02] * 10):
        feed(value)
    assert first(feed(20.02)).quality is Quality.FROZEN
    admission = feed(20.03)
    assert (first(admission).quality, admission.blind) == (Quality.GOOD, frozenset())


def test_a_level_may_have_moved_while_its_transmitter_was_frozen() -> None:
    """Time is counted from the last true reading, not from the repeats that were believed."""
    feed, rng = one_tank(), np.random.default_rng(1)
    last = 0.0
    for _ in range(200):
        last = noisy(rng, 20.0)
        feed(last)
    assert first([feed(last) for _ in range(7)][-1]).quality is Quality.FROZEN
    assert first(feed(last + 15.9)).quality is Quality.GOOD


def test_an_undeclared_coarse_converter_raises_no_false_alarm() -> None:
    """The resolution is learned from the steps seen: readings in steps of σ, declared as continuous, never freeze."""
    feed, rng = one_tank(resolution=0.0), np.random.default_rng(3)
    qualities = [first(feed(noisy(rng, 20.0, resolution=0.02))).quality for _ in range(5000)]
    assert set(qualities) == {Quality.GOOD}


def test_a_living_transmitter_stays_good_for_hours() -> None:
    """Ten thousand readings with the declared noise and resolution are all good."""
    feed, rng = one_tank(), np.random.default_rng(2)
    assert {first(feed(noisy(rng, 20.0))).quality for _ in range(10_000)} == {Quality.GOOD}


def test_the_same_sample_read_twice_is_no_repeat() -> None:
    """A server that has not looked again proves nothing about the transmitter."""
    feed = one_tank(resolution=0.0)
    for step, value in enumerate((20.0, 20.01, 20.0101)):
        feed(value, server_ns=step)
    qualities = [first(feed(20.02, server_ns=10 + step // 3)).quality for step in range(9)]
    assert qualities == [Quality.GOOD] * 9


def test_without_noise_a_still_signal_beside_a_moving_one_is_frozen() -> None:
    """Tank 2 stands still for ten readings while tank 1 moves by more than 5 % of its span."""
    feed = Feed(plan_admission(row_of_tanks(2, noise=0.0)))
    admissions = [feed(20.0 + 0.3 * step, 20.0) for step in range(12)]
    judged = [one.signals[1].quality for one in admissions]
    assert judged == [Quality.GOOD] * 9 + [Quality.FROZEN] * 3
    assert {one.signals[0].quality for one in admissions} == {Quality.GOOD}


def test_without_noise_a_plant_at_rest_is_not_frozen() -> None:
    """When nobody moves, standing still is no sign of anything."""
    feed = Feed(plan_admission(row_of_tanks(2, noise=0.0)))
    qualities = {judged.quality for _ in range(100) for judged in feed(20.0, 20.0, 5.0).signals[:2]}
    assert qualities == {Quality.GOOD}


def test_a_failed_neighbour_is_no_witness() -> None:
    """Only sound readings of a neighbour show that it moved."""
    feed = Feed(plan_admission(row_of_tanks(2, noise=0.0)))
    feed(20.0, 20.0)
    for _ in range(20):
        feed(Reading(39.0, BAD_STATUS), 20.0)
    assert feed(nan, 20.0).signals[1].quality is Quality.GOOD


def test_a_disturbance_without_noise_is_never_frozen() -> None:
    """A consumer that stays shut while levels move is a consumer that stays shut."""
    plan = plan_admission(row_of_tanks(2, noise=0.0))
    plan = replace(plan, rules=(*plan.rules[:2], replace(plan.rules[2], noise=0.0)))
    feed = Feed(plan)
    qualities = {feed(20.0 + 0.3 * step, 20.0 - 0.3 * step, 0.0).signals[2].quality for step in range(40)}
    assert qualities == {Quality.GOOD}


def test_a_server_clock_that_stands_still_makes_values_stale() -> None:
    """Three readings without a new server timestamp: the peer no longer vouches for the value."""
    feed = one_tank()
    qualities = [first(feed(20.0 + 0.01 * step, server_ns=77)).quality for step in range(5)]
    assert qualities == [Quality.GOOD] * 3 + [Quality.STALE] * 2


def test_an_old_source_timestamp_alone_is_no_fault() -> None:
    """It marks the last change: a steady value keeps it for hours (faults row 39)."""
    feed = one_tank(noise=0.0)
    qualities = {first(feed(Reading(20.0, source_ns=1, server_ns=step))).quality for step in range(1000)}
    assert qualities == {Quality.GOOD}


def test_a_server_timestamp_that_went_back_is_stale_once() -> None:
    """An older value out of order is not used; a server whose clock was set back is believed from the next on."""
    feed = one_tank()
    feed(20.0, server_ns=1000)
    assert first(feed(20.01, server_ns=900)).quality is Quality.STALE
    assert first(feed(20.02, server_ns=901)).quality is Quality.GOOD


def test_a_panel_clock_that_stands_still_makes_everything_stale() -> None:
    """A server that answers for a dead PLC is found out by the PLC's own clock."""
    feed = Feed(plan_admission(row_of_tanks(2)))
    feed(20.0, 20.0, 5.0)
    admissions = [feed(20.0 + 0.01 * step, 20.0 - 0.01 * step, 5.0, clock_runs=False) for step in range(1, 4)]
    assert {one.quality for one in admissions[1].signals} == {Quality.GOOD}
    assert {one.quality for one in admissions[2].signals} == {Quality.STALE}
    assert {one.quality for one in feed(20.1, 20.1, 5.1).signals} == {Quality.GOOD}


def test_an_unreadable_panel_clock_stands_still() -> None:
    """No reading of the clock is no sign of life."""
    plan = plan_admission(row_of_tanks(1))
    memory = first_memory(plan)
    for k in range(3):
        admission, memory = admit(plan, memory, k, {"tank-1.level": Reading(20.0 + 0.01 * k)}, None)
    assert first(admission).quality is Quality.STALE


def test_without_a_panel_no_clock_is_asked() -> None:
    """A plant file without a panel is not stale for lack of one."""
    plan = plan_admission(row_of_tanks(1, panel=False))
    memory = first_memory(plan)
    for k in range(10):
        admission, memory = admit(plan, memory, k, {"tank-1.level": Reading(20.0 + 0.01 * k)}, None)
    assert first(admission).quality is Quality.GOOD


def test_blind_after_three_unusable_periods() -> None:
    """The estimator coasts over two periods; the third blinds the section; one value heals it."""
    feed = one_tank()
    feed(20.0)
    admissions = [feed(), feed(), feed(), feed(20.1)]
    assert [one.blind for one in admissions] == [frozenset(), frozenset(), {"tank-1"}, frozenset()]
    assert [first(one).unusable for one in admissions] == [1, 2, 3, 0]


def test_what_was_never_seen_is_blind_from_the_start() -> None:
    """There is nothing to coast on before the first value."""
    assert one_tank()().blind == {"tank-1"}


def test_only_the_section_that_lost_its_level_is_blind() -> None:
    """Neighbours keep their sight."""
    feed = Feed(plan_admission(row_of_tanks(3)))
    feed(20.0, 20.0, 20.0, 5.0)
    for step in range(1, 4):
        admission = feed(20.0 + 0.01 * step, None, 20.0 - 0.01 * step, 5.0 + 0.1 * step)
    assert admission.blind == {"tank-2"}


def test_a_lost_disturbance_blinds_nobody() -> None:
    """The estimator sees the effect of an unmeasured consumer."""
    feed = Feed(plan_admission(row_of_tanks(2)))
    feed(20.0, 20.0, 5.0)
    for step in range(1, 6):
        admission = feed(20.0 + 0.01 * step, 20.0 - 0.01 * step, None)
    assert admission.signals[2].unusable == 5
    assert admission.blind == frozenset()


def test_the_same_readings_give_the_same_judgements() -> None:
    """State is explicit: the memory of a period can be used again."""
    plan = plan_admission(row_of_tanks(1))
    reading = {"tank-1.level": Reading(20.0)}
    _, memory = admit(plan, first_memory(plan), 1, reading, 1)
    assert admit(plan, memory, 2, reading, 2) == admit(plan, memory, 2, reading, 2)


def test_judgements_can_be_had_by_tag() -> None:
    """Rooms that think in tags get a mapping."""
    assert one_tank()(20.0).by_tag() == {"tank-1.level": Admitted("tank-1.level", 20.0, Quality.GOOD, 0)}


WIRE = st.one_of(
    st.none(),
    st.booleans(),
    st.floats(),
    st.integers(),
    st.text(max_size=3),
    st.binary(max_size=3),
    st.lists(st.floats(), max_size=3),
    st.lists(st.floats(), max_size=3).map(np.array),
    st.sampled_from([0.0, 20.0, 20.01, 40.0]),
)
STATUS = st.sampled_from([0, UNCERTAIN_STATUS, BAD_STATUS, RESERVED_STATUS, -5, 2**33])
READING = st.builds(Reading, WIRE, STATUS, st.none(), st.none() | st.integers(0, 5))


@given(st.lists(st.tuples(st.lists(READING, max_size=4), st.none() | st.integers(0, 3)), max_size=25))
def test_nothing_unfit_is_ever_admitted(periods: list[tuple[list[Reading], int | None]]) -> None:
    """Whatever comes: no exception, a value exactly for usable qualities, finite and in range; counts agree."""
    plan = plan_admission(row_of_tanks(3))
    memory = first_memory(plan)
    counts = [0] * len(plan.rules)
    for k, (readings, clock) in enumerate(periods):
        tags = [rule.tag for rule in plan.rules]
        admission, memory = admit(plan, memory, k, dict(zip(tags, readings, strict=False)), clock)
        for position, (rule, judged) in enumerate(zip(plan.rules, admission.signals, strict=True)):
            assert (judged.value is not None) == judged.quality.usable == (judged.unusable == 0)
            counts[position] = 0 if judged.quality.usable else counts[position] + 1
            assert judged.unusable >= counts[position]
            if judged.value is not None:
                assert isfinite(judged.value)
                assert rule.low <= judged.value <= rule.high
            if rule.sees and counts[position] >= plan.blind_after:
                assert rule.section in admission.blind


@given(WIRE)
def test_number_gives_a_float_or_nothing(value: object) -> None:
    """The reading of a wire value as a number never raises and never yields another type."""
    assert type(number(value)) in (float, type(None))
