"""Tests of `gateway.requests.words`."""

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.authority import Authority
from gateway.requests import Hold, Rearm, Rehearse, Request, RequestError, SetAuthority, SetTarget, parse_request
from tests.gateway.requests.samples import PLANT


@pytest.mark.parametrize(
    ("words", "request_"),
    [
        ("hold tank-1", Hold(("tank-1",))),
        ("hold all", Hold(("tank-1", "tank-2"))),
        ("rearm tank-2", Rearm(("tank-2",))),
        ("rearm all", Rearm(("tank-1", "tank-2"))),
        ("authority observe", SetAuthority(Authority.OBSERVE)),
        ("authority limited", SetAuthority(Authority.LIMITED)),
        ("authority full", SetAuthority(Authority.FULL)),
        ("target tank-1.level 18.5", SetTarget("tank-1.level", 18.5)),
        ("target tank-1.level 18.5 cm", SetTarget("tank-1.level", 18.5)),
        ("rehearse slow 3", Rehearse(3)),
        ("  hold   tank-1 ", Hold(("tank-1",))),
    ],
)
def test_every_request_is_read(words: str, request_: Request) -> None:
    """The words of the four requests, with a section or all, with and without a unit."""
    assert parse_request(words, PLANT) == request_
    assert parse_request(words.split(), PLANT) == request_


@pytest.mark.parametrize(
    ("words", "message"),
    [
        ("rehearse fast 3", "rehearse wants “slow” and a number of periods from 1 to 100; got “fast 3”"),
        ("rehearse slow 0", "got “slow 0”"),
        ("rehearse slow 1e3", "got “slow 1e3”"),
        ("rehearse", "got “nothing”"),
        ("", "nothing was asked; ask one of: hold SECTION"),
        ("hlod tank-1", "“hlod” is no request; allowed: hold, rearm, authority, target, rehearse; nearest: hold"),
        ("hold", "hold wants one section, or all; got 0 words"),
        ("hold tank-1 tank-2", "got 2 words"),
        ("hold tnak-1", "“tnak-1” is no section of Two Tanks; allowed: tank-1, tank-2, all; nearest: tank-1"),
        ("rearm everything", "“everything” is no section of Two Tanks"),
        ("authority", "“” is no authority; allowed: observe, limited, full"),
        ("authority ful", "nearest: full"),
        ("target tank-1.level", "target wants a tag, a value and perhaps its unit; got 1 words"),
        ("target tank-1.levle 20", "“tank-1.levle” is no tag of Two Tanks.*nearest: tank-1.level"),
        ("target tank-1.pump 20", "tank-1.pump has no target in the plant file.*tags with one: tank-1.level"),
        ("target tank-1.level high", "“high” is no number; give the target of tank-1.level in cm"),
        ("target tank-1.level 18.5 mm", "tank-1.level is in cm, not mm"),
        ("target tank-1.level 37", "tank-1.level = 37 cm is outside its limits; allowed: 4 to 36 cm"),
        ("target tank-1.level -1", "outside its limits"),
        ("target tank-1.level nan", "outside its limits"),
        ("target tank-1.level inf", "outside its limits"),
    ],
)
def test_a_wrong_request_says_what_is_right(words: str, message: str) -> None:
    """Each mistake names the word, what is allowed there, and the nearest right spelling."""
    with pytest.raises(RequestError, match=message):
        parse_request(words, PLANT)


def test_a_large_plant_does_not_flood_the_error() -> None:
    """Of many names a few are spelled out and the rest counted."""
    many = replace(PLANT, sections=tuple(replace(PLANT.sections[0], name=f"zone-{n}") for n in range(500)))
    with pytest.raises(RequestError, match=r"zone-0, .*zone-7 and 493 more; nearest: zone-77") as found:
        parse_request("hold zon-77", many)
    assert len(str(found.value)) < 200


@given(st.text(max_size=40))
def test_whatever_is_typed_is_a_request_or_a_request_error(words: str) -> None:
    """No text ends in another exception, and nothing without a known verb is a request."""
    try:
        parse_request(words, PLANT)
    except RequestError:
        return
    assert words.split(maxsplit=1)[0] in ("hold", "rearm", "authority", "target", "rehearse")


@given(st.floats(allow_nan=True, allow_infinity=True))
def test_a_target_that_is_read_is_within_its_limits(value: float) -> None:
    """No number passes that the plant file does not allow."""
    try:
        request = parse_request(f"target tank-1.level {value!r}", PLANT)
    except RequestError:
        assert not 4.0 <= value <= 36.0
    else:
        assert request == SetTarget("tank-1.level", value)
        assert 4.0 <= value <= 36.0
