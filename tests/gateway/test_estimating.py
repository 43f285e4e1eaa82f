"""Tests of `gateway.estimating`: what is admitted, scaled and believed, and what is not."""

from __future__ import annotations

import numpy as np
import pytest

from controllers import Estimate
from controllers.arrays import Floats
from gateway.admit import Admitted
from gateway.design import PlantDesign
from gateway.estimating import Seen, estimate_period
from gateway.signals import Quality

ALL_AT_TARGET = {f"tank-{number}.level": 20.0 for number in range(1, 9)} | {"tank-5.consumer": 0.0}


def admitted(**changed: float | None) -> dict[str, Admitted]:
    """All levels at 20 cm but those changed, `tank_4` for tank 4's level; None is unusable."""
    values: dict[str, float | None] = dict(ALL_AT_TARGET)
    for name, value in changed.items():
        tag = "tank-5.consumer" if name == "consumer" else f"{name.replace('_', '-')}.level"
        values[tag] = value
    return {
        tag: Admitted(tag, value, Quality.BAD if value is None else Quality.GOOD, int(value is None))
        for tag, value in values.items()
    }


def see(design: PlantDesign, readings: dict[str, Admitted], *returned: str) -> Seen:
    """What a period saw, nothing known before."""
    return Seen.of(design, readings, frozenset(returned), np.zeros(design.network.e.shape[1]))


@pytest.fixture
def rest(tarn_row: PlantDesign) -> Floats:
    """Inputs that keep the plant where it was linearised, engineering units."""
    return tarn_row.scaling.u_zero


def nothing(design: PlantDesign) -> Floats:
    """No measured disturbance."""
    return np.zeros(design.network.e.shape[1])


def test_outputs_are_scaled_deviations(tarn_row: PlantDesign) -> None:
    """22 cm are 5 % of span above the operating point."""
    seen = see(tarn_row, admitted(tank_4=22.0))
    assert seen.used.all()
    assert seen.y == pytest.approx([0, 0, 0, 0.05, 0, 0, 0, 0], abs=1e-6)


def test_what_is_not_usable_is_not_used(tarn_row: PlantDesign) -> None:
    """It has no number either: a NaN that is used would be seen at once."""
    seen = see(tarn_row, admitted(tank_4=None))
    assert seen.used.tolist() == [place != 3 for place in range(8)]
    assert np.isnan(seen.y[3])


def test_a_measured_disturbance_stands_at_its_place(tarn_row: PlantDesign) -> None:
    """6 cm3/s out of tank 5, in spans per period; all other places are zero."""
    seen = see(tarn_row, admitted(consumer=6.0))
    (known,) = tarn_row.known
    scaling = tarn_row.scaling
    assert known.signal.tag == "tank-5.consumer"
    assert seen.known[known.place] * scaling.w_unit[known.place] == pytest.approx(6e-6)
    assert np.count_nonzero(seen.known) == 1


def test_an_unusable_disturbance_keeps_its_last_value(tarn_row: PlantDesign) -> None:
    """And is never edited in place: the standing that came in stays as it was."""
    (known,) = tarn_row.known
    before = nothing(tarn_row)
    before[known.place] = 0.01
    seen = Seen.of(tarn_row, admitted(consumer=None), frozenset(), before)
    assert seen.known[known.place] == 0.01
    Seen.of(tarn_row, admitted(consumer=6.0), frozenset(), before)
    assert before[known.place] == 0.01


def test_sections_that_see_again_are_marked(tarn_row: PlantDesign) -> None:
    """In the plant's order."""
    assert see(tarn_row, admitted(), "tank-4", "tank-1").returned.tolist() == [True, *[False] * 2, True, *[False] * 4]


def test_a_section_that_still_lacks_a_reading_does_not_start_anew(tarn_row: PlantDesign) -> None:
    """It may see again for another reason, an input that is known again; there is no level to start from."""
    assert not see(tarn_row, admitted(tank_4=None), "tank-4").returned.any()


def test_the_first_estimate_is_what_the_plant_shows_at_rest(tarn_row: PlantDesign, rest: Floats) -> None:
    """Levels as read, pump flows as the inputs hold them, no disturbance, no innovation."""
    estimate, innovation = estimate_period(
        tarn_row, None, rest, nothing(tarn_row), see(tarn_row, admitted(tank_4=22.0))
    )
    assert tarn_row.network.c @ estimate.x == pytest.approx([0, 0, 0, 0.05, 0, 0, 0, 0], abs=1e-6)
    assert not estimate.w.any()
    assert not innovation.any()


def test_a_section_that_shows_nothing_at_first_is_taken_to_be_at_rest(tarn_row: PlantDesign, rest: Floats) -> None:
    """A number is needed; its section is blind and will not act on it."""
    estimate, _ = estimate_period(tarn_row, None, rest, nothing(tarn_row), see(tarn_row, admitted(tank_4=None)))
    assert np.isfinite(estimate.x).all()
    assert (tarn_row.network.c @ estimate.x)[3] == 0.0


def test_the_innovation_is_the_distance_from_the_prediction(tarn_row: PlantDesign, rest: Floats) -> None:
    """In spans; zero for what was not used."""
    at_rest = Estimate(np.zeros(tarn_row.network.a.shape[0]), nothing(tarn_row))
    seen = see(tarn_row, admitted(tank_4=22.0, tank_6=None))
    _, innovation = estimate_period(tarn_row, at_rest, rest, nothing(tarn_row), seen)
    assert innovation == pytest.approx([0, 0, 0, 0.05, 0, 0, 0, 0], abs=1e-6)


def test_without_measurement_the_estimate_coasts(tarn_row: PlantDesign, rest: Floats) -> None:
    """It is the prediction itself."""
    before = Estimate(np.full(tarn_row.network.a.shape[0], 0.01), nothing(tarn_row))
    blind = see(tarn_row, {tag: Admitted(tag, None, Quality.BAD, 1) for tag in ALL_AT_TARGET})
    estimate, _ = estimate_period(tarn_row, before, rest, nothing(tarn_row), blind)
    assert estimate.x == pytest.approx(tarn_row.network.a @ before.x)


def test_a_known_disturbance_is_expected_not_noticed(tarn_row: PlantDesign, rest: Floats) -> None:
    """What the measured consumer of the last period took is in the prediction."""
    (known,) = tarn_row.known
    before = Estimate(np.zeros(tarn_row.network.a.shape[0]), nothing(tarn_row))
    drawn = nothing(tarn_row)
    drawn[known.place] = 0.01
    blind = see(tarn_row, {tag: Admitted(tag, None, Quality.BAD, 1) for tag in ALL_AT_TARGET})
    estimate, _ = estimate_period(tarn_row, before, rest, drawn, blind)
    assert estimate.x == pytest.approx(tarn_row.network.e @ drawn)


def test_a_section_that_returns_starts_from_what_it_reads_and_the_others_go_on(
    tarn_row: PlantDesign, rest: Floats
) -> None:
    """Its disturbance estimate is kept: it is the best there is."""
    net = tarn_row.network
    before = Estimate(np.full(net.a.shape[0], 0.01), np.full(net.e.shape[1], 1e-4))
    readings = admitted(tank_4=12.0)
    usual, _ = estimate_period(tarn_row, before, rest, nothing(tarn_row), see(tarn_row, readings))
    again, _ = estimate_period(tarn_row, before, rest, nothing(tarn_row), see(tarn_row, readings, "tank-4"))
    own = slice(int(net.x_at[3]), int(net.x_at[4]))
    assert (net.c @ again.x)[3] == pytest.approx(-0.2)
    assert (np.delete(again.x, own) == np.delete(usual.x, own)).all()
    assert (again.w == usual.w).all()
