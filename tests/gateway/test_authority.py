"""Tests of `gateway.authority`."""

from dataclasses import replace
from itertools import product
from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.authority import (
    Authority,
    AuthorityState,
    Changed,
    Denial,
    Denied,
    at_start,
    change,
    default_authority,
)
from gateway.hold import Ask
from gateway.plantfile.plant import SiteKind
from tests.gateway.plants import pump

PUMPS = (pump("tank-1"), pump("tank-2"))
FOUND = {"tank-1.pump": 50.0, "tank-2.pump": 95.0}
BANDS = {"tank-1.pump": (40.0, 60.0), "tank-2.pump": (85.0, 100.0)}


def state(level: Authority) -> AuthorityState:
    """A state of this level as it would have come about."""
    return AuthorityState(level, BANDS if level is Authority.LIMITED else {})


def changed(outcome: Changed | Denied) -> Changed:
    """The outcome, which must be a change."""
    assert isinstance(outcome, Changed)
    return outcome


def denied(outcome: Changed | Denied) -> Denied:
    """The outcome, which must be a denial."""
    assert isinstance(outcome, Denied)
    return outcome


def test_the_bench_starts_in_full_and_a_live_site_in_observe() -> None:
    """Every kind of site has its default."""
    assert {kind: default_authority(kind) for kind in SiteKind} == {
        SiteKind.BENCH: Authority.FULL,
        SiteKind.LIVE: Authority.OBSERVE,
    }


def test_only_observe_writes_nothing() -> None:
    """The other levels write."""
    assert [level for level in Authority if not level.writes] == [Authority.OBSERVE]


def test_every_level_has_its_own_sentence() -> None:
    """A person is told what it means."""
    assert len({level.sentence for level in Authority}) == len(Authority)


@pytest.mark.parametrize("level", [Authority.OBSERVE, Authority.FULL])
def test_a_run_can_start_with_it(level: Authority) -> None:
    """Observe and full need no inputs that were read, and have no band."""
    assert at_start(level) == AuthorityState(level)
    assert at_start(level).bands() == {}


def test_a_run_cannot_start_limited() -> None:
    """There is nothing yet to lay a band around."""
    with pytest.raises(ValueError, match="start in observe"):
        at_start(Authority.LIMITED)


ASKS = {
    (Authority.OBSERVE, Authority.LIMITED): Ask.TAKE,
    (Authority.OBSERVE, Authority.FULL): Ask.TAKE,
    (Authority.LIMITED, Authority.OBSERVE): Ask.RELEASE,
    (Authority.LIMITED, Authority.LIMITED): None,
    (Authority.LIMITED, Authority.FULL): None,
    (Authority.FULL, Authority.OBSERVE): Ask.RELEASE,
    (Authority.FULL, Authority.LIMITED): None,
}


@pytest.mark.parametrize(("before", "to"), list(product(Authority, Authority)))
def test_every_pair_of_levels(before: Authority, to: Authority) -> None:
    """Each change asks of the sections what it must; observe and full asked again change nothing."""
    outcome = change(state(before), to, PUMPS, FOUND, SiteKind.BENCH, soaked=False)
    if (before, to) in ASKS:
        assert changed(outcome) == Changed(state(to), before, ASKS[before, to], overridden=False)
    else:
        assert denied(outcome).reason is Denial.ALREADY


def test_asking_for_limited_again_finds_the_inputs_anew() -> None:
    """The band moves to what is there now."""
    now = {"tank-1.pump": 20.0, "tank-2.pump": 20.0}
    outcome = changed(change(state(Authority.LIMITED), Authority.LIMITED, PUMPS, now, SiteKind.LIVE, soaked=False))
    assert outcome.state.bands() == {"tank-1.pump": (10.0, 30.0), "tank-2.pump": (10.0, 30.0)}


@pytest.mark.parametrize("to", [Authority.LIMITED, Authority.FULL])
@pytest.mark.parametrize("value", [None, nan, inf])
def test_an_unread_input_denies_the_whole_change(to: Authority, value: float | None) -> None:
    """Nothing is taken over by halves; the sentence names the input."""
    found = {"tank-1.pump": 50.0} | ({} if value is None else {"tank-2.pump": value})
    outcome = denied(change(state(Authority.OBSERVE), to, PUMPS, found, SiteKind.BENCH, soaked=True))
    assert (outcome.reason, outcome.tags) == (Denial.UNREAD, ("tank-2.pump",))
    assert "tank-2.pump" in outcome.sentence


def test_an_input_outside_its_limits_denies_the_whole_change() -> None:
    """It could not be driven back without breaking a limit; the sentence says where it stands."""
    found = FOUND | {"tank-2.pump": 120.0}
    outcome = denied(change(state(Authority.OBSERVE), Authority.FULL, PUMPS, found, SiteKind.BENCH, soaked=True))
    assert (outcome.reason, outcome.tags) == (Denial.OUTSIDE, ("tank-2.pump",))
    assert "tank-2.pump at 120 % (0..100)" in outcome.sentence


def test_releasing_needs_nothing() -> None:
    """Observe is granted whatever is known of the plant."""
    assert changed(change(state(Authority.FULL), Authority.OBSERVE, PUMPS, {}, SiteKind.LIVE, soaked=False))


def test_full_on_a_live_site_wants_a_soak_record() -> None:
    """Without one it is denied, with one it is granted, limited needs none."""
    before = state(Authority.OBSERVE)
    outcome = change(before, Authority.FULL, PUMPS, FOUND, SiteKind.LIVE, soaked=False)
    assert denied(outcome).reason is Denial.NOT_SOAKED
    assert not changed(change(before, Authority.FULL, PUMPS, FOUND, SiteKind.LIVE, soaked=True)).overridden
    assert not changed(change(before, Authority.LIMITED, PUMPS, FOUND, SiteKind.LIVE, soaked=False)).overridden


def test_overriding_is_possible_and_loud() -> None:
    """The change says that it was given against the missing record."""
    outcome = changed(
        change(state(Authority.OBSERVE), Authority.FULL, PUMPS, FOUND, SiteKind.LIVE, soaked=False, override=True)
    )
    assert outcome.overridden
    assert "no passed soak record" in outcome.sentence


def test_an_override_does_not_excuse_unread_inputs() -> None:
    """It is about the record alone."""
    outcome = change(state(Authority.OBSERVE), Authority.FULL, PUMPS, {}, SiteKind.LIVE, soaked=False, override=True)
    assert denied(outcome).reason is Denial.UNREAD


def test_an_override_where_none_is_needed_is_not_told() -> None:
    """On the bench there is nothing to override."""
    outcome = change(
        state(Authority.OBSERVE), Authority.FULL, PUMPS, FOUND, SiteKind.BENCH, soaked=False, override=True
    )
    assert not changed(outcome).overridden


def test_many_inputs_in_the_way_are_counted() -> None:
    """A plant of a thousand zones does not fill the screen."""
    many = [replace(pump("tank-1"), name=f"pump-{number}") for number in range(20)]
    outcome = denied(change(state(Authority.OBSERVE), Authority.FULL, many, {}, SiteKind.BENCH, soaked=True))
    assert outcome.sentence.endswith("tank-1.pump-7 and 12 more.")
    assert len(outcome.tags) == 20


@pytest.mark.parametrize("band", [0.0, -0.1, 1.1, nan])
def test_a_band_must_be_a_fraction(band: float) -> None:
    """Misuse names the argument."""
    with pytest.raises(ValueError, match=r"^band_spans = "):
        change(state(Authority.FULL), Authority.LIMITED, PUMPS, FOUND, SiteKind.BENCH, soaked=False, band_spans=band)


@given(st.floats(0, 100), st.floats(1e-3, 1))
def test_the_band_holds_what_was_found_and_stays_inside_the_limits(found: float, band: float) -> None:
    """So a take-over never moves an input by itself, and never allows more than the plant file."""
    outcome = change(
        state(Authority.OBSERVE),
        Authority.LIMITED,
        PUMPS[:1],
        {"tank-1.pump": found},
        SiteKind.LIVE,
        soaked=False,
        band_spans=band,
    )
    low, high = changed(outcome).state.bands()["tank-1.pump"]
    assert 0.0 <= low <= found <= high <= 100.0
    assert high - low <= 200.0 * band + 1e-9
