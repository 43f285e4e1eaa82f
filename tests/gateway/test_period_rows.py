"""Tests of `gateway.period_rows`: targets, limits and held inputs as row numbers."""

from __future__ import annotations

from math import inf

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from controllers import RowData
from gateway.design import PlantDesign, move_of
from gateway.period_rows import InputPath, period_rows

MOST = 10.0
"""Largest move in one period, 20 %/s for 500 ms."""


def rows(design: PlantDesign, data: RowData, place: int) -> tuple[list[float], list[float]]:
    """Lower and upper limits of one input over the horizon, engineering units."""
    at = design.synthesis.table.rows_of(design.inputs[place].tag)
    zero, width = design.scaling.u_zero[place], design.scaling.u_width[place]
    return [float(v) for v in data.lower[at] * width + zero], [float(v) for v in data.upper[at] * width + zero]


def only(design: PlantDesign, place: int, path: InputPath) -> RowData:
    """Rows with one path of interest, the other inputs free at mid-span."""
    return period_rows(design, [path if k == place else InputPath(50.0, None) for k in range(len(design.inputs))], {})


def test_a_free_input_moves_between_its_hard_limits(tarn_row: PlantDesign) -> None:
    """0..100 % over the horizon; at the first step no faster than its rate from what was written last."""
    lower, upper = rows(tarn_row, only(tarn_row, 3, InputPath(48.0, None)), 3)
    assert lower == pytest.approx([48.0 - MOST] + [0.0] * 19)
    assert upper == pytest.approx([48.0 + MOST] + [100.0] * 19)


def test_the_band_of_authority_narrows_it(tarn_row: PlantDesign) -> None:
    """At every step."""
    lower, upper = rows(tarn_row, only(tarn_row, 3, InputPath(48.0, None, (40.0, 55.0))), 3)
    assert lower == pytest.approx([40.0] * 20)
    assert upper == pytest.approx([55.0] * 20)


def test_near_a_hard_limit_the_limit_wins_over_the_rate(tarn_row: PlantDesign) -> None:
    """At 97 % it may rise by 3, not by 10."""
    _, upper = rows(tarn_row, only(tarn_row, 3, InputPath(97.0, None)), 3)
    assert upper == pytest.approx([100.0] * 20)


@given(last=st.floats(-500, 500), low=st.floats(0, 100), width=st.floats(0, 100))
def test_limits_never_cross_wherever_the_input_was_found(
    tarn_row: PlantDesign, last: float, low: float, width: float
) -> None:
    """An input found outside its band or limits leads to the nearest edge, never to an impossible row."""
    lower, upper = rows(tarn_row, only(tarn_row, 3, InputPath(last, None, (low, low + width))), 3)
    assert all(one <= other for one, other in zip(lower, upper, strict=True))
    assert min(lower) >= low - 1e-9
    assert max(upper) <= min(low + width, 100.0) + 1e-9


def test_a_held_input_is_given_step_by_step(tarn_row: PlantDesign) -> None:
    """Lower equals upper, along the path of its hold; its moves are as large as the path has them."""
    path = np.linspace(45.0, 30.0, 20)
    data = only(tarn_row, 3, InputPath(48.0, path))
    lower, upper = rows(tarn_row, data, 3)
    assert lower == pytest.approx(list(path))
    assert upper == lower
    moves = tarn_row.synthesis.table.rows_of(move_of(tarn_row.inputs[3]))
    assert (data.lower[moves] == -inf).all()
    assert (data.upper[moves] == inf).all()


def test_other_inputs_are_untouched_by_a_hold(tarn_row: PlantDesign) -> None:
    """Their limits and their moves' limits stay."""
    data = only(tarn_row, 3, InputPath(48.0, np.full(20, 48.0)))
    lower, upper = rows(tarn_row, data, 2)
    assert lower[1:] == pytest.approx([0.0] * 19)
    assert upper[1:] == pytest.approx([100.0] * 19)
    moves = tarn_row.synthesis.table.rows_of(move_of(tarn_row.inputs[2]))
    assert data.upper[moves] == pytest.approx(np.full(20, MOST / 100.0))


def test_a_target_is_the_distance_from_where_the_design_rests(tarn_row: PlantDesign) -> None:
    """In spans: 24 cm are a tenth of 40 cm above the 20 cm it was linearised at; the others stay."""
    free = [InputPath(50.0, None) for _ in tarn_row.inputs]
    data = period_rows(tarn_row, free, {"tank-2.level": 24.0})
    table = tarn_row.synthesis.table
    assert data.target[table.rows_of("tank-2.level")] == pytest.approx(np.full(20, 0.1))
    assert data.target[table.rows_of("tank-3.level")] == pytest.approx(np.zeros(20))


def test_rows_are_new_numbers_every_time(tarn_row: PlantDesign) -> None:
    """The design's own are never touched, since all periods share them."""
    before = tarn_row.synthesis.data().lower.copy()
    only(tarn_row, 3, InputPath(48.0, np.full(20, 48.0)))
    assert (tarn_row.synthesis.data().lower == before).all()
