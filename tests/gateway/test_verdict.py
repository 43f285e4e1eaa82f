"""Tests of `gateway.verdict`."""

from hypothesis import given
from hypothesis import strategies as st

from gateway.verdict import CAUSE_ORDER, Verdict, first_cause


def test_only_on_time_is_no_miss() -> None:
    """Every verdict but on_time counts against the section."""
    assert [verdict for verdict in Verdict if not verdict.is_miss] == [Verdict.ON_TIME]


def test_every_verdict_has_its_own_sentence() -> None:
    """A person gets one distinct, finished sentence per verdict."""
    sentences = [verdict.sentence for verdict in Verdict]
    assert len(set(sentences)) == len(Verdict)
    assert all(sentence.endswith(".") and 20 < len(sentence) < 120 for sentence in sentences)


def test_order_names_every_verdict_once() -> None:
    """No verdict is left without a place in the order of causes."""
    assert sorted(CAUSE_ORDER) == sorted(Verdict)


def test_nothing_found_is_on_time() -> None:
    """A period with nothing against it is on time."""
    assert first_cause([]) is Verdict.ON_TIME


def test_severed_link_explains_blindness() -> None:
    """The cause nearest to the start of the pipeline stands."""
    assert first_cause([Verdict.UNWRITTEN, Verdict.BLIND, Verdict.SEVERED]) is Verdict.SEVERED


@given(st.lists(st.sampled_from(Verdict), min_size=1))
def test_a_miss_is_never_hidden(found: list[Verdict]) -> None:
    """Whatever applies, one miss among it makes the verdict a miss, and one of those found."""
    assert first_cause(found) in found
    assert first_cause(found).is_miss == any(verdict.is_miss for verdict in found)
