"""Tests of `gateway.saturate`."""

from dataclasses import replace
from math import inf, isfinite, nan

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.plantfile.plant import Signal
from gateway.saturate import Fault, Guard
from tests.gateway.plants import pump

SECTIONS = ("tank-1", "tank-2", "tank-3")


def guard(*inputs: Signal) -> Guard:
    """A guard over three tanks; by default one pump of 0..100 % at 20 %/s each for tanks 1 and 2."""
    return Guard(inputs or (pump("tank-1"), pump("tank-2")), SECTIONS, 0.5)


def array(*values: float) -> np.ndarray[tuple[int, ...], np.dtype[np.float64]]:
    """A plain vector."""
    return np.array(values, dtype=float)


def test_what_is_inside_passes_unchanged() -> None:
    """Values within limits, rate and band are not touched, bit for bit."""
    wanted = array(51.23456789, 40.0)
    looked = guard().check(wanted, array(50.0, 50.0), {})
    assert looked.values.tolist() == wanted.tolist()
    assert (looked.refused.tolist(), looked.faults, looked.clipped) == ([False] * 3, {}, ())


@pytest.mark.parametrize("value", [nan, inf, -inf])
def test_what_is_not_finite_is_refused(value: float) -> None:
    """Its section is refused, the other one is written."""
    looked = guard().check(array(value, 50.0), array(50.0, 50.0), {})
    assert looked.faults == {"tank-1.pump": Fault.NOT_FINITE}
    assert looked.refused.tolist() == [True, False, False]
    assert np.isnan(looked.values[0])
    assert looked.values[1] == 50.0


@pytest.mark.parametrize(("value", "edge"), [(100.0 + 5e-5, 100.0), (-5e-5, 0.0)])
def test_rounding_past_a_hard_limit_is_clipped(value: float, edge: float) -> None:
    """Half a millionth of the span outside is moved to the limit and said to be."""
    looked = guard().check(array(value, 50.0), array(edge, 50.0), {})
    assert looked.values[0] == edge
    assert looked.clipped == ("tank-1.pump",)
    assert not looked.refused.any()


@pytest.mark.parametrize("value", [100.0 + 2e-4, -2e-4])
def test_more_than_rounding_past_a_hard_limit_is_refused(value: float) -> None:
    """Two millionths are a fault of whoever computed it."""
    looked = guard().check(array(value, 50.0), array(50.0 + np.sign(value) * 45.0, 50.0), {})
    assert looked.faults == {"tank-1.pump": Fault.HARD_LIMIT}


@pytest.mark.parametrize("sign", [-1.0, 1.0])
def test_rate_is_judged_against_what_was_written_last(sign: float) -> None:
    """20 %/s are 10 % per half second: rounding past it is clipped, more is refused."""
    clipped = guard().check(array(50.0 + sign * (10.0 + 5e-5), 50.0), array(50.0, 50.0), {})
    assert clipped.values[0] == 50.0 + sign * 10.0
    refused = guard().check(array(50.0 + sign * 10.1, 50.0), array(50.0, 50.0), {})
    assert refused.faults == {"tank-1.pump": Fault.RATE}


def test_the_band_is_a_limit_like_the_others() -> None:
    """Authority's band clips rounding and refuses the rest; the other input has none."""
    bands = {"tank-1.pump": (48.0, 52.0)}
    assert guard().check(array(52.00005, 59.0), array(50.0, 50.0), bands).values.tolist() == [52.0, 59.0]
    assert guard().check(array(53.0, 59.0), array(50.0, 50.0), bands).faults == {"tank-1.pump": Fault.BAND}


@pytest.mark.parametrize("last", [nan, inf])
def test_without_a_reference_a_rate_cannot_be_judged(last: float) -> None:
    """An unknown last value refuses a rate-limited input."""
    assert guard().check(array(50.0, 50.0), array(last, 50.0), {}).faults == {"tank-1.pump": Fault.NO_REFERENCE}


def test_without_a_rate_no_reference_is_needed() -> None:
    """An input that may jump needs no last value."""
    free = guard(replace(pump("tank-1"), rate_per_s=inf))
    assert free.check(array(99.0), array(nan), {}).values.tolist() == [99.0]


@pytest.mark.parametrize(
    ("last", "bands"),
    [(120.0, {}), (30.0, {"tank-1.pump": (50.0, 70.0)}), (50.0, {"tank-1.pump": (nan, nan)})],
)
def test_no_room_is_refused(last: float, bands: dict[str, tuple[float, float]]) -> None:
    """When limits, rate and band leave no value, none is written, not even the nearest."""
    looked = guard().check(array(60.0, 50.0), array(last, 50.0), bands)
    assert looked.faults == {"tank-1.pump": Fault.NO_ROOM}


@pytest.mark.parametrize("rate", [nan, -1.0])
def test_a_rate_that_is_none_refuses(rate: float) -> None:
    """A nonsensical limit is never read as no limit."""
    spoilt = guard(replace(pump("tank-1"), rate_per_s=rate))
    assert spoilt.check(array(50.0), array(50.0), {}).refused[0]


def test_one_refused_value_refuses_its_section() -> None:
    """The other input of the section is not written either."""
    two = guard(pump("tank-1"), replace(pump("tank-1"), name="gate"), pump("tank-3"))
    looked = two.check(array(50.0, nan, 50.0), array(50.0, 50.0, 50.0), {})
    assert np.isnan(looked.values).tolist() == [True, True, False]
    assert looked.refused.tolist() == [True, False, False]


def test_the_verdicts_follow_the_order_of_the_sections() -> None:
    """A section without inputs has its place and is never refused."""
    looked = guard(pump("tank-3"), pump("tank-1")).check(array(nan, 50.0), array(50.0, 50.0), {})
    assert looked.refused.tolist() == [False, False, True]


@pytest.mark.parametrize("period_s", [0.0, -1.0, nan, inf])
def test_a_period_must_be_positive(period_s: float) -> None:
    """Misuse names the argument."""
    with pytest.raises(ValueError, match=r"^period_s = "):
        Guard([pump("tank-1")], SECTIONS, period_s)


@pytest.mark.parametrize("tolerance", [-1e-9, 1.0, nan])
def test_a_tolerance_must_be_a_fraction(tolerance: float) -> None:
    """Misuse names the argument."""
    with pytest.raises(ValueError, match=r"^tolerance_spans = "):
        Guard([pump("tank-1")], SECTIONS, 0.5, tolerance)


def test_an_input_of_an_unknown_section_is_misuse() -> None:
    """No input can slip past for lack of a section."""
    with pytest.raises(ValueError, match=r"tank-9\.pump: section tank-9 is not among those given"):
        Guard([pump("tank-9")], SECTIONS, 0.5)


@pytest.mark.parametrize(("wanted", "last", "name"), [((1.0,), (1.0, 1.0), "wanted"), ((1.0, 1.0), (1.0,), "last")])
def test_shapes_must_agree(wanted: tuple[float, ...], last: tuple[float, ...], name: str) -> None:
    """A missing value is misuse, not an input left out in silence."""
    with pytest.raises(ValueError, match=f"^{name} has shape"):
        guard().check(array(*wanted), array(*last), {})


ANY = st.floats() | st.sampled_from([0.0, 100.0, 100.00005, -0.00005, 50.0, 60.00005])
EDGES = st.tuples(ANY, ANY)


@given(wanted=ANY, last=ANY, hard=EDGES, band=EDGES, rate=ANY | st.just(inf), period_s=st.floats(1e-3, 60))
def test_nothing_unsafe_ever_comes_out(
    wanted: float,
    last: float,
    hard: tuple[float, float],
    band: tuple[float, float],
    rate: float,
    period_s: float,
) -> None:
    """Whatever the controller, the wire and the settings say: what comes out is finite, inside, and no leap."""
    signal = replace(pump("tank-1"), hard=hard, rate_per_s=rate)
    looked = Guard([signal], SECTIONS, period_s).check(array(wanted), array(last), {signal.tag: band})
    value = float(looked.values[0])
    assert looked.refused[0] == np.isnan(value) == (signal.tag in looked.faults)
    if not looked.refused[0]:
        assert isfinite(value)
        assert hard[0] <= value <= hard[1]
        assert band[0] <= value <= band[1]
        if rate != inf:
            assert last - rate * period_s <= value <= last + rate * period_s
        assert abs(value - wanted) <= 1e-6 * signal.width * (1 + 1e-9)


@given(wanted=st.floats(0, 100), last=st.floats(0, 100))
def test_what_obeys_is_never_refused(wanted: float, last: float) -> None:
    """The guard does not stop a controller that keeps its limits."""
    obeying = min(max(wanted, last - 10.0), last + 10.0)
    looked = guard(pump("tank-1")).check(array(obeying), array(last), {})
    assert looked.values.tolist() == [obeying]
