"""`check`: one screen of facts that hold, the same as JSON, and codes that follow from them."""

from __future__ import annotations

import json
from dataclasses import replace
from math import nan
from pathlib import Path

import pytest

from controllers import NotLocalizableError
from gateway.cli.dialling import Reached, reach
from gateway.cli.examination import Examination, examine, lines_of, reached_lines
from gateway.cli.forecast import Forecast, forecast
from gateway.cli.optimum import Distance, distance_from_whole_plant
from gateway.clock import RealClock, VirtualClock
from gateway.design import PlantDesign, build_design
from gateway.links.protocol import AddressUnknownError, PeerUnreachableError
from gateway.plantfile import Plant, read_plant_text
from gateway.simulated import identifiers_of, simulated_plant
from sim_plant.direct import DirectPlant
from sim_plant.servers.opcua import OpcUaPlant
from tests.gateway.cli.rig import PLANT, lengthsman, plant_file

FREE = "opc.tcp://127.0.0.1:0"


@pytest.fixture(scope="module")
def design() -> PlantDesign:
    """The three tanks, designed once."""
    return build_design(read_plant_text(PLANT, "three.toml"))


@pytest.fixture(scope="module")
def found(design: PlantDesign) -> Examination:
    """What `check` finds out about them."""
    return examine(design, RealClock())


def line(found: Examination, design: PlantDesign, what: str) -> str:
    """One line of the screen."""
    (how,) = [how for name, how in lines_of(design.plant, found) if name == what]
    return how


def test_the_numbers_of_the_plant_are_its_own(found: Examination) -> None:
    """Three tanks, two tubes, nine quantities over eight steps."""
    assert (dict(found.sections), dict(found.couplings)) == ({"tank": 3}, {"tube": 2})
    assert found.signals == {
        "measured": 3,
        "driven": 3,
        "measured_disturbance": 0,
        "unmeasured_disturbance": 0,
    }
    assert (found.quantities, found.rows) == (9, 72)


def test_it_is_localizable_at_the_least_locality_that_works(found: Examination, design: PlantDesign) -> None:
    """A row of tanks with a pump each needs its neighbours, not more."""
    assert (found.locality, found.least_locality) == (1, 1)
    with_more = examine(build_design(_with_locality(2)), RealClock())
    assert (with_more.locality, with_more.least_locality) == (2, 1)
    assert "at locality 2; the least that works is 1" in line(with_more, design, "localizable")


def test_the_distance_shrinks_as_locality_grows() -> None:
    """At a locality that spans the plant nothing is left of it: both problems are the same."""
    near = distance_from_whole_plant(build_design(_with_locality(1)))
    far = distance_from_whole_plant(build_design(_with_locality(2)))
    assert near.unsettled == far.unsettled == 0
    assert far.spans < 1e-7
    assert far.spans <= near.spans < 1e-2


def test_the_loop_is_stable_and_the_observer_too(found: Examination) -> None:
    """Radii below one; the verdict follows from both."""
    assert found.closed_loop_radius is not None
    assert 0.0 < found.closed_loop_radius < 1.0
    assert 0.0 < found.observer_radius < 1.0
    assert found.stable
    assert not replace(found, closed_loop_radius=1.0).stable
    assert not replace(found, observer_radius=1.02).stable
    assert replace(found, closed_loop_radius=None).stable


def test_the_forecast_times_every_period_but_the_first(design: PlantDesign) -> None:
    """On a clock that each look moves on by a millisecond, every period takes one."""

    class Counting(VirtualClock):
        """Moves on by a millisecond at every look."""

        def monotonic_ns(self) -> int:
            """Now, a millisecond later than ever before."""
            self.spend(1_000_000)
            return super().monotonic_ns()

    work = forecast(design, Counting(), periods=5)
    assert (work.median_ms, work.worst_ms, work.periods) == (1.0, 1.0, 5)
    assert work.budget_ms == pytest.approx(135.0)
    assert work.headroom == pytest.approx(1 - 1 / 135)
    assert 1 <= work.median_iterations <= work.most_iterations


def test_a_period_that_does_not_fit_is_said_and_fails(found: Examination, design: PlantDesign) -> None:
    """The worst period beyond its budget: marked, and no longer in time."""
    slow = replace(found, forecast=Forecast(100.0, 140.0, 135.0, 10.0, 12, 60))
    assert not slow.in_time
    assert line(slow, design, "work per period").startswith("! does not fit: ")
    assert found.in_time


def test_what_is_unsafe_is_marked(found: Examination, design: PlantDesign) -> None:
    """Cautions of the plant file stand on the screen, each with a mark."""
    assert line(found, design, "unsafe") == f"! {found.unsafe[0]}"
    assert "insecure" in found.unsafe[0]


@pytest.mark.parametrize(
    ("distance", "text"),
    [
        (Distance(2.5e-4, 8, 0), "first inputs within 0.025 % of span of the whole plant's (8 sampled states)"),
        (Distance(1e-9, 8, 2), "(6 sampled states, 2 more not solved to the end)"),
        (Distance(nan, 8, 8), "! not known: none of 8 sampled states could be solved to the end"),
    ],
)
def test_the_distance_in_words(found: Examination, design: PlantDesign, distance: Distance, text: str) -> None:
    """Percent of span and samples; what was not solved counts as nothing and is said."""
    assert line(replace(found, distance=distance), design, "optimum").endswith(text)


def test_the_screen_fits_and_the_json_says_the_same(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """Plain lines off a terminal, at most one screen; JSON with the same fingerprint and code."""
    file = plant_file(tmp_path)
    screen = lengthsman(capsys, "check", file)
    facts = json.loads(lengthsman(capsys, "check", file, "--json").out)
    assert screen.code == facts["exit"] == 0
    assert screen.out.startswith(f"Three Tanks, {file}\nsections         3 tank\ncouplings        2 tube\n")
    assert screen.out.count("\n") <= 24
    assert f"fingerprint      {facts['fingerprint']}\n" in screen.out
    assert facts["rows"] == 72
    assert facts["reached"] is None
    assert facts["sites"]["live"] == {"kind": "live", "endpoint": "opc.tcp://127.0.0.1:1"}


def test_a_plant_that_is_not_localizable_is_told_so(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """What the design says, sections, boundary and the least locality, is the message; code 2."""

    def refuse(_: Plant) -> PlantDesign:
        raise NotLocalizableError("section 'tank-1' cannot be confined to 1 couplings. Fix: set the locality to 2")

    monkeypatch.setattr("gateway.cli.check.build_design", refuse)
    file = plant_file(tmp_path)
    ended = lengthsman(capsys, "check", file)
    assert ended.code == 2
    assert ended.err == f"{file}: section 'tank-1' cannot be confined to 1 couplings. Fix: set the locality to 2\n"


def test_an_unstable_loop_is_code_1(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch, found: Examination
) -> None:
    """The facts are shown all the same."""
    monkeypatch.setattr("gateway.cli.check.examine", lambda _, __: replace(found, closed_loop_radius=1.01))
    ended = lengthsman(capsys, "check", plant_file(tmp_path))
    assert ended.code == 1
    assert "closed loop      ! unstable: spectral radius 1.0100" in ended.out


def test_a_site_nobody_answers_at_is_code_3(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """The endpoint and the fix are named, before anything is designed."""
    ended = lengthsman(capsys, "check", plant_file(tmp_path), "--site=bench")
    assert ended.code == 3
    assert "opc.tcp://127.0.0.1:1 cannot be reached: nobody listens there" in ended.err


@pytest.mark.wire
async def test_a_site_that_answers_is_read_and_timed() -> None:
    """All addresses are there; a transmitter that dropped out is named with its status."""
    plant = read_plant_text(PLANT, "three.toml")
    clock, site = VirtualClock(seed=1), plant.sites["bench"]
    direct = DirectPlant(simulated_plant(plant), clock)
    direct.provoke("dropout tank-2.level")
    clock.advance_to(direct.next_scan_ns())
    async with OpcUaPlant(direct, clock, FREE, site.namespace, identifiers_of(direct.tags, site)) as server:
        reached = await reach(plant, replace(site, endpoint=server.endpoint), RealClock())
    assert reached.tags == 17
    assert reached.unanswered == 0
    assert 0.0 < reached.read_median_ms <= reached.read_worst_ms
    assert [one.split(" ")[0] for one in reached.bad] == ["tank-2.level"]


@pytest.mark.wire
async def test_a_site_that_lacks_addresses_names_them() -> None:
    """The server is there but one address is not: it is named with its tag."""
    plant = read_plant_text(PLANT, "three.toml")
    clock, site = VirtualClock(seed=1), plant.sites["bench"]
    direct = DirectPlant(simulated_plant(plant), clock)
    async with OpcUaPlant(direct, clock, FREE, site.namespace, identifiers_of(direct.tags, site)) as server:
        wrong = replace(site, endpoint=server.endpoint, overrides={"tank-3.level": "tank-3/depth"})
        with pytest.raises(AddressUnknownError, match=r"1 of 17 addresses(.|\n)*tank-3\.level at 'tank-3/depth'"):
            await reach(plant, wrong, RealClock())


async def test_nobody_there_is_an_error() -> None:
    """As `check` reports it."""
    plant = read_plant_text(PLANT, "three.toml")
    with pytest.raises(PeerUnreachableError):
        await reach(plant, plant.sites["bench"], RealClock())


def test_what_a_dialled_site_answered_in_words() -> None:
    """Times, reads without an answer, and bad values with a mark."""
    site = read_plant_text(PLANT, "three.toml").sites["bench"]
    lines = dict(reached_lines(site, Reached(17, 41.3, 2.14, 3.0, 1, ("tank-2.level (BadNoData)",))))
    assert lines["dialled bench"] == "all 17 addresses are there; 41 ms to connect and look at them"
    assert lines["read"] == "2.1 ms median, 3.0 ms worst; ! 1 not answered"
    assert lines["bad values"] == "! tank-2.level (BadNoData)"
    silent = dict(reached_lines(site, Reached(17, 41.3, nan, nan, 10, ())))
    assert silent["read"] == "! none of 10 reads was answered"


def _with_locality(locality: int) -> Plant:
    return read_plant_text(PLANT.replace("locality = 1", f"locality = {locality}"), "three.toml")


def test_a_plant_in_two_pieces_is_said(found: Examination) -> None:
    """Every piece begins somewhere; a plant in one piece has nothing to say."""
    assert found.advice == ()
    two = build_design(read_plant_text(PLANT.replace('along = "tank-{1..3}"', 'along = "tank-{1..2}"'), "two.toml"))
    lines = [how for what, how in lines_of(two.plant, examine(two, RealClock())) if what == "advice"]
    assert len(lines) == 2
    assert all("begins a plant of" in how for how in lines)
