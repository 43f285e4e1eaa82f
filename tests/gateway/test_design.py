"""Tests of `gateway.design`: a plant file made into physics, a network in scaled deviations, and a synthesis."""

from __future__ import annotations

import dataclasses
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from controllers import NotLocalizableError
from controllers.arrays import Floats
from gateway.design import PlantDesign, build_design, move_of, operating_point_of, physics_of
from gateway.plantfile.plant import Plant, Role, Signal
from sim_plant.plant import PlantState, advance


def with_level(plant: Plant, **changed: object) -> Plant:
    """The plant with every level signal changed."""

    def change(signal: Signal) -> Signal:
        return replace(signal, **changed) if signal.role is Role.MEASURED else signal  # type: ignore[arg-type]

    sections = tuple(replace(one, signals=tuple(map(change, one.signals))) for one in plant.sections)
    return replace(plant, sections=sections)


def small(plant: Plant) -> Plant:
    """Three tanks of it, planned five periods ahead: designed in no time."""
    controller = replace(plant.controller, horizon=5)
    return replace(plant, sections=plant.sections[:3], couplings=plant.couplings[:2], controller=controller)


def test_the_plant_rests_at_its_operating_point(tarn_row: PlantDesign) -> None:
    """Nothing moves there, and every output is at its target."""
    x, u, w = tarn_row.point.x, tarn_row.point.u, tarn_row.point.w
    assert np.abs(tarn_row.physics.derivative(x, u, w)).max() < 1e-12
    assert tarn_row.physics.outputs(x) == pytest.approx(np.full(8, 0.2))


def test_without_a_target_a_level_rests_in_the_middle_of_its_span(tarn_row: PlantDesign) -> None:
    """20 of 40 cm, here as there."""
    plant = with_level(tarn_row.plant, target=None)
    assert operating_point_of(plant, physics_of(plant)).x == pytest.approx(tarn_row.point.x)


def test_signals_stand_in_the_order_of_the_network(tarn_row: PlantDesign) -> None:
    """Outputs as y, inputs as u, sections as in the plant file."""
    assert [signal.tag for signal in tarn_row.outputs] == [f"tank-{n}.level" for n in range(1, 9)]
    assert [signal.tag for signal in tarn_row.inputs] == [f"tank-{n}.pump" for n in range(1, 9)]
    assert tarn_row.section_of_input == tuple(range(8))
    assert [one.signal.tag for one in tarn_row.known] == ["tank-5.consumer"]
    assert tarn_row.network.names == tuple(f"tank-{n}" for n in range(1, 9))


@given(level=st.floats(-100, 200), pump=st.floats(-100, 200))
def test_scaling_there_and_back_is_nothing(tarn_row: PlantDesign, level: float, pump: float) -> None:
    """Whatever the value."""
    scaling = tarn_row.scaling
    levels, pumps = np.full(8, level), np.full(8, pump)
    assert scaling.y_back(scaling.y(levels)) == pytest.approx(levels, abs=1e-9)
    assert scaling.u_back(scaling.u(pumps)) == pytest.approx(pumps, abs=1e-9)


def test_an_output_is_scaled_by_its_span(tarn_row: PlantDesign) -> None:
    """The whole of it is one; the network shows it from the state alike."""
    assert tarn_row.scaling.y(np.full(8, 24.0)) == pytest.approx(np.full(8, 0.1), abs=1e-6)
    x = np.zeros(tarn_row.network.a.shape[0])
    x[tarn_row.network.x_at[3]] = 0.1
    assert (tarn_row.network.c @ x)[3] == pytest.approx(0.1)


def stepped(design: PlantDesign, x: Floats, u: Floats, w: Floats) -> Floats:
    """The nonlinear plant one period on, scaled deviations in and out."""
    scaling = design.scaling
    state = PlantState.start(design.physics, x * scaling.x_unit + scaling.x_zero)
    u_si = design.point.u + u * np.array([s.width * s.scale.factor for s in design.inputs])
    w_si = design.point.w + w * scaling.w_unit
    after = advance(design.physics, state, u_si, w_si, design.plant.period_s, 0.005)
    return np.asarray((after.x - scaling.x_zero) / scaling.x_unit)


@pytest.mark.parametrize("what", ["states", "inputs", "disturbances"])
def test_the_network_is_the_plants_own_step(tarn_row: PlantDesign, what: str) -> None:
    """A small push of every column moves the nonlinear plant as the matrix says.

    But for what a neighbour feels of it in the same period, since couplings are held over one: 4e-3 of a whole push.
    """
    net = tarn_row.network
    sizes = {"states": net.a.shape[0], "inputs": net.b.shape[1], "disturbances": net.e.shape[1]}
    matrix = {"states": net.a, "inputs": net.b, "disturbances": net.e}[what].toarray()
    push = 1e-4
    for column in range(sizes[what]):
        moves = {name: np.zeros(size) for name, size in sizes.items()}
        moves[what][column] = push
        moved = stepped(tarn_row, moves["states"], moves["inputs"], moves["disturbances"])
        assert moved / push == pytest.approx(matrix[:, column], abs=5e-3)


def test_a_disturbance_of_one_moves_its_state_by_its_whole_scale(tarn_row: PlantDesign) -> None:
    """In one period: so that all disturbances are of one size to the observer."""
    assert np.abs(tarn_row.network.e.toarray()).max(axis=0) == pytest.approx(np.ones(tarn_row.network.e.shape[1]))


def test_only_neighbours_touch(tarn_row: PlantDesign) -> None:
    """The discretised network keeps the row's sparsity."""
    a, at = tarn_row.network.a.toarray(), tarn_row.network.x_at
    for i in range(8):
        for j in range(8):
            block = a[at[i] : at[i + 1], at[j] : at[j + 1]]
            assert block.any() == (abs(i - j) <= 1)


def test_the_error_of_held_couplings_is_small_and_told(tarn_row: PlantDesign) -> None:
    """About 1e-4 of span for Tarn Row's 500 ms."""
    assert 0 < tarn_row.coupling_error < 1e-3


def test_rows_price_and_limit_what_the_plant_file_says(tarn_row: PlantDesign) -> None:
    """Levels at their target with a soft band, moves priced and limited, in spans."""
    table, data = tarn_row.synthesis.table, tarn_row.synthesis.data()
    level, move = table.rows_of("tank-4.level"), table.rows_of(move_of(tarn_row.inputs[3]))
    assert data.price[level] == pytest.approx(np.ones(20))
    assert data.soft_lower[level] == pytest.approx(np.full(20, -0.4))
    assert data.soft_upper[level] == pytest.approx(np.full(20, 0.4))
    assert data.price[move] == pytest.approx(np.full(20, 0.3))
    assert data.upper[move] == pytest.approx(np.full(20, 0.1))
    assert table.horizon == 20


def test_the_assembled_observer_is_stable(tarn_row: PlantDesign) -> None:
    """Or there would be no design."""
    assert tarn_row.observer.radius < 1


def test_the_same_plant_file_has_the_same_fingerprint(tarn_row: PlantDesign) -> None:
    """Built twice."""
    plant = small(tarn_row.plant)
    assert build_design(plant).fingerprint == build_design(plant).fingerprint


@pytest.mark.parametrize(
    "changed",
    [
        lambda plant: with_level(plant, target=21.0),
        lambda plant: replace(plant, controller=replace(plant.controller, rho=0.31)),
        lambda plant: replace(plant, hold=replace(plant.hold, latch_after=9)),
    ],
)
def test_whatever_changes_the_plant_file_changes_the_fingerprint(tarn_row: PlantDesign, changed: object) -> None:
    """A passed record is for exactly this plant file."""
    assert callable(changed)
    plant = small(tarn_row.plant)
    assert build_design(changed(plant)).fingerprint != build_design(plant).fingerprint


def test_a_plant_that_cannot_be_localized_is_refused(tarn_row: PlantDesign) -> None:
    """No tank is alone with what it does; the message says how far to look instead."""
    plant = small(tarn_row.plant)
    narrow = replace(plant, controller=replace(plant.controller, locality=0))
    with pytest.raises(NotLocalizableError, match="set the locality to 1"):
        build_design(narrow)


def test_a_design_is_frozen_and_prints_briefly(tarn_row: PlantDesign) -> None:
    """It is shared between threads, and named in errors."""
    with pytest.raises(dataclasses.FrozenInstanceError):
        tarn_row.coupling_error = 0.0  # type: ignore[misc]
    assert tarn_row.fingerprint in repr(tarn_row)
    assert len(repr(tarn_row)) < 200
