"""Tests of `gateway.journal.codec`: what is put in comes back, bit for bit."""

import struct
from math import inf, nan

import msgspec
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.hold import State
from gateway.journal import codec
from gateway.journal.records import Event, Loss, PeriodRecord, RunRecord, SectionRow, SignalRow, Timing
from gateway.signals import Quality
from gateway.verdict import Verdict
from tests.gateway.journal import samples

INT64 = st.integers(-(2**63), 2**63 - 1)
FLOATS = st.floats(allow_nan=False)
VALUES = st.one_of(st.none(), st.booleans(), INT64, FLOATS, st.text(max_size=20))
SIGNALS = st.builds(
    SignalRow, VALUES, st.integers(0, 2**32 - 1), st.none() | INT64, st.none() | INT64, st.sampled_from(Quality)
)
NUMBERS = st.lists(FLOATS, max_size=3).map(tuple)
SECTIONS = st.builds(
    SectionRow,
    st.sampled_from(State),
    st.sampled_from(Verdict),
    st.lists(SIGNALS, max_size=2).map(tuple),
    NUMBERS,
    NUMBERS,
    NUMBERS,
)
OPTIONAL = st.none() | INT64
PERIODS = st.builds(
    PeriodRecord,
    k=INT64,
    due_ns=INT64,
    timing=st.builds(Timing, INT64, OPTIONAL, OPTIONAL, OPTIONAL, OPTIONAL, OPTIONAL),
    iterations=OPTIONAL,
    worst_residual_spans=st.none() | st.floats(allow_nan=False, allow_infinity=False),
    slack_us=OPTIONAL,
    sections=st.lists(SECTIONS, max_size=3).map(tuple),
    panel=st.lists(SIGNALS, max_size=2).map(tuple),
)


@given(PERIODS)
def test_a_period_comes_back_as_it_was(record: PeriodRecord) -> None:
    """Encoding and decoding is the identity on every period."""
    assert codec.period_of(codec.period_columns(record)) == record


@given(st.binary(min_size=8, max_size=8))
def test_every_float_keeps_its_bits(bits: bytes) -> None:
    """Any 64-bit pattern survives in estimates and readings: a replay starts from the very same numbers."""
    (number,) = struct.unpack("<d", bits)
    row = SectionRow(
        State.DRIVING, Verdict.ON_TIME, (SignalRow(number, 0, None, None, Quality.GOOD),), (number,), (number,)
    )
    record = msgspec.structs.replace(samples.period(1), sections=(row,))
    (back,) = codec.period_of(codec.period_columns(record)).sections
    for found in (back.measured[0].value, back.estimates[0], back.wanted[0]):
        assert struct.pack("<d", found) == struct.pack("<d", number)


def test_the_same_record_gives_the_same_bytes() -> None:
    """Two runs of one soak can be compared byte for byte."""
    assert codec.period_columns(samples.period(3)) == codec.period_columns(samples.period(3))


@pytest.mark.parametrize("residual", [nan, inf, -inf])
def test_a_residual_that_is_not_finite_is_none(residual: float) -> None:
    """A column holds a number or nothing."""
    record = msgspec.structs.replace(samples.period(1), worst_residual_spans=residual)
    assert codec.period_of(codec.period_columns(record)).worst_residual_spans is None


def test_numpy_numbers_are_numbers() -> None:
    """What comes straight out of an array is recorded like the plain number."""
    row = SectionRow(State.DRIVING, Verdict.ON_TIME, (), (np.float64(0.1),), (np.float32(0.5),), (np.int64(2),))  # type: ignore[arg-type]
    record = msgspec.structs.replace(
        samples.period(1),
        sections=(row,),
        iterations=np.int64(12),
        worst_residual_spans=np.float64(0.25),
    )
    back = codec.period_of(codec.period_columns(record))
    assert (back.iterations, back.worst_residual_spans) == (12, 0.25)
    assert (back.sections[0].estimates, back.sections[0].wanted, back.sections[0].written) == ((0.1,), (0.5,), (2,))


def test_an_object_is_refused() -> None:
    """What is neither number nor text is an error that names the type."""
    with pytest.raises(TypeError, match="object cannot be recorded"):
        codec.period_columns(samples.unrecordable_period(1))


@given(
    st.dictionaries(
        st.text(max_size=8),
        st.recursive(
            st.none() | st.booleans() | st.integers(-(2**53), 2**53) | st.text(max_size=8),
            lambda inner: st.lists(inner, max_size=3),
        ),
        max_size=4,
    )
)
def test_an_events_detail_comes_back_as_it_was(detail: dict[str, object]) -> None:
    """JSON facts survive, nested ones too."""
    event = Event(wall_ns=5, kind="transition", sentence="So.", detail=detail, k=None, section=None, seq=9)
    assert codec.event_of((9, *codec.event_columns(event))) == event


@pytest.mark.parametrize("fact", [object(), "half a character: \ud800"])
def test_an_event_outlives_facts_that_cannot_be_written(fact: object) -> None:
    """The sentence is kept, the facts become text."""
    event = Event(wall_ns=1, kind="a", sentence="So.", detail={"fact": fact})
    back = codec.event_of((1, *codec.event_columns(event)))
    assert back.sentence == "So."
    assert "fact" in str(back.detail["unrecordable"])


def test_half_characters_are_replaced() -> None:
    """A sentence with an odd file name in it is kept."""
    event = Event(wall_ns=1, kind="a", sentence="No file \ud800.")
    assert codec.event_of((1, *codec.event_columns(event))).sentence == "No file ?."


def test_detail_does_not_depend_on_the_order_of_its_keys() -> None:
    """Equal facts give equal bytes."""
    one = Event(wall_ns=1, kind="a", sentence="b", detail={"x": 1, "y": 2})
    other = Event(wall_ns=1, kind="a", sentence="b", detail={"y": 2, "x": 1})
    assert codec.event_columns(one) == codec.event_columns(other)


def test_a_run_comes_back_as_it_was() -> None:
    """Versions and layout survive their JSON."""
    run = samples.run()
    assert codec.run_of((*codec.run_columns(run), None, None)) == RunRecord(
        **msgspec.structs.asdict(run), ended_ns=None, how=None
    )


def test_outcomes_and_losses_come_back_as_they_were() -> None:
    """Their columns are their fields."""
    outcome = msgspec.structs.replace(samples.outcome(4), seq=2)
    loss = Loss(what="period", cause="c", count=3, first_k=1, last_k=3, first_ns=10, last_ns=30, wall_ns=40, seq=6)
    assert codec.outcome_of((2, *codec.outcome_columns(outcome))) == outcome
    assert codec.loss_of((6, *codec.loss_columns(loss))) == loss
