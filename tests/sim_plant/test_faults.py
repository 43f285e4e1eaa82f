"""Lines of fault: what is understood, and what the answer to a wrong one says."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_plant.faults import ALL, PERMIT, Fault, FaultError, FaultKind, parse


@pytest.mark.parametrize(
    ("line", "fault"),
    [
        ("bias tank-4.level -3.5", Fault(FaultKind.BIAS, "tank-4.level", value=-3.5)),
        ("freeze tank-4.level for 20 s", Fault(FaultKind.FREEZE, "tank-4.level", duration_s=20.0)),
        ("dropout tank-4.level for 1.5 min", Fault(FaultKind.DROPOUT, "tank-4.level", duration_s=90.0)),
        ("nan tank-4.level", Fault(FaultKind.NAN, "tank-4.level")),
        ("stuck tank-3.pump", Fault(FaultKind.STUCK, "tank-3.pump")),
        ("clear tank-4.level", Fault(FaultKind.CLEAR, "tank-4.level")),
        ("clear all", Fault(FaultKind.CLEAR, ALL)),
        ("set tank-3.consumer 8 for 5 s", Fault(FaultKind.SET, "tank-3.consumer", value=8.0, duration_s=5.0)),
        ("release tank-3.consumer", Fault(FaultKind.RELEASE, "tank-3.consumer")),
        ("permit off", Fault(FaultKind.PERMIT, PERMIT, on=False)),
        ("  permit   on for 2 s ", Fault(FaultKind.PERMIT, PERMIT, on=True, duration_s=2.0)),
    ],
)
def test_line_is_understood(line: str, fault: Fault) -> None:
    """Every form of the list, with and without a duration."""
    assert parse(line) == fault


@pytest.mark.parametrize(
    ("line", "says"),
    [
        ("", "empty line"),
        ("freze tank-4.level", r"word 1 of 'freze tank-4.level': read 'freze'.*nearest: 'freeze'"),
        ("freeze", "SIGNAL is missing; the form is 'freeze SIGNAL"),
        ("permit", "off or on is missing"),
        ("bias tank-4.level", "VALUE is missing; the form is 'bias SIGNAL VALUE"),
        ("bias tank-4.level high", "word 3 .* read 'high', a finite number is wanted"),
        ("bias tank-4.level nan", "word 3 .* read 'nan', a finite number is wanted"),
        ("set tank-3.consumer inf", "word 3 .* read 'inf', a finite number is wanted"),
        ("freeze tank-4.level 3", "word 3 .* read '3', nothing more is expected"),
        ("freeze tank-4", "word 2 .* read 'tank-4', a signal is written SECTION.SIGNAL"),
        ("freeze all", "word 2 .* only 'clear' takes 'all'"),
        ("permit maybe", "word 2 .* read 'maybe', allowed are 'off' and 'on'"),
        ("freeze tank-4.level for", "word 3 .* a duration is written 'for N s'"),
        ("freeze tank-4.level for 20", "word 3 .* a duration is written 'for N s'"),
        ("freeze tank-4.level for ever s", "word 4 .* read 'ever', a number above zero is wanted"),
        ("freeze tank-4.level for 0 s", "word 4 .* read '0', a duration must be above zero"),
        ("freeze tank-4.level for 20 h", "word 5 .* read 'h', allowed units of time are 's', 'min'"),
        ("clear tank-4.level for 20 s", "word 3 .* 'clear' acts at once and has no duration"),
    ],
)
def test_wrong_line_says_where_and_what_is_allowed(line: str, says: str) -> None:
    """The place, what stands there, and what may stand there."""
    with pytest.raises(FaultError, match=says):
        parse(line)


@given(st.text(max_size=40))
def test_anything_is_a_fault_or_a_fault_error(line: str) -> None:
    """No other exception, whatever a client sends."""
    try:
        fault = parse(line)
    except FaultError:
        return
    assert fault.kind in FaultKind


FAULTS = st.builds(
    Fault,
    st.sampled_from([FaultKind.BIAS, FaultKind.SET]),
    st.sampled_from(["tank-4.level", "tank-3.consumer"]),
    value=st.integers(-999, 999).map(float),
    duration_s=st.one_of(st.none(), st.integers(1, 999).map(float)),
)


@given(FAULTS)
def test_a_fault_written_out_reads_the_same(fault: Fault) -> None:
    """The text of a fault, as it stands in the log, provokes the same fault again."""
    assert parse(str(fault)) == fault
