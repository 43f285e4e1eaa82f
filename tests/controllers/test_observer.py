"""Tests of `controllers.observer`."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from controllers.exceptions import ObserverError
from controllers.network import Network
from controllers.observer import Estimate, Noise, Observer, seed
from controllers.plans import Measured, Settings
from controllers.synthesis import Design
from tests.controllers.plants import SHAPES, anywhere, grid, row, tank_quantities, tanks, zones


def noise_of(network: Network) -> Noise:
    """Plausible deviations for any of the plants."""
    p, n, r = network.c.shape[0], network.a.shape[0], network.e.shape[1]
    return Noise(np.full(p, 0.05), np.full(n, 0.01), np.full(r, 0.3))


def observer_of(network: Network) -> Observer:
    """An observer with those."""
    return Observer.build(network, noise_of(network))


def test_the_loop_settles_without_offset() -> None:
    """A constant disturbance nobody measures is estimated, and every level ends at its target, moved ones too."""
    network = tanks(row(4), np.random.default_rng(0))
    design = Design.build(
        network, tank_quantities(network), horizon=12, locality=2, settings=Settings(max_iterations=60)
    )
    observer = observer_of(network)
    data = design.table.retarget(design.data(), {"tank-2.level": 3.0})
    drawn = np.array([0.0, 6.0, 0.0, -4.0])
    x, u = np.zeros(8), np.zeros(4)
    estimate, before = Estimate(np.zeros(8), np.zeros(4)), None
    for _ in range(250):
        predicted = observer.predict(estimate, u, np.zeros(4))
        estimate, _ = observer.correct(predicted, network.c @ x, np.ones(4, dtype=bool))
        plan, before = design.solve(Measured(estimate.x, estimate.w, u), data, before)
        u = plan.inputs
        x = network.a @ x + network.b @ u + network.e @ drawn
    np.testing.assert_allclose(network.c @ x, [0.0, 3.0, 0.0, 0.0], atol=40 * 5e-4)
    np.testing.assert_allclose(estimate.w, drawn, atol=0.05)


def test_known_disturbances_enter_the_prediction() -> None:
    """What is measured of a disturbance is added to the estimate of the rest, and is not estimated again."""
    network = tanks(row(3))
    observer = observer_of(network)
    known = np.array([0.0, 8.0, 0.0])
    x, estimate = np.zeros(6), Estimate(np.zeros(6), np.zeros(3))
    for _ in range(20):
        x = network.a @ x + network.e @ known
        predicted = observer.predict(estimate, np.zeros(3), known)
        estimate, innovation = observer.correct(predicted, network.c @ x, np.ones(3, dtype=bool))
        np.testing.assert_allclose(innovation, 0.0, atol=1e-12)
    np.testing.assert_allclose(estimate.w, 0.0, atol=1e-12)
    np.testing.assert_allclose(estimate.x, x, atol=1e-12)


@given(st.integers(0, 10_000))
def test_unused_outputs_coast_and_never_leak(draw: int) -> None:
    """An output that was not admitted, NaN, infinite or absurd, changes nothing: only its own prediction stands."""
    rng = np.random.default_rng(draw)
    network = tanks(SHAPES["tree"](rng), rng)
    observer = observer_of(network)
    start = anywhere(network, rng)
    predicted = observer.predict(Estimate(start.x, start.w), start.u_before, np.zeros(network.size))
    used = rng.random(network.size) < 0.5
    y = rng.normal(size=network.size)
    spoiled = np.where(used, y, rng.choice([np.nan, np.inf, -np.inf, 1e300], network.size))
    estimate, innovation = observer.correct(predicted, spoiled, used)
    plain, _ = observer.correct(predicted, np.where(used, y, network.c @ predicted.x), used)
    assert np.isfinite(estimate.x).all()
    assert (estimate.x == plain.x).all()
    assert (estimate.w == plain.w).all()
    assert not innovation[~used].any()
    coasting = np.repeat(~used, 2)
    assert (estimate.x[coasting] == predicted.x[coasting]).all()
    assert (estimate.w[~used] == predicted.w[~used]).all()


def test_nothing_used_is_the_prediction() -> None:
    """With every output refused the estimate is exactly the prediction."""
    network = tanks(row(3))
    observer = observer_of(network)
    predicted = Estimate(np.arange(6.0), np.ones(3))
    estimate, innovation = observer.correct(predicted, np.full(3, np.nan), np.zeros(3, dtype=bool))
    assert (estimate.x == predicted.x).all()
    assert (estimate.w == predicted.w).all()
    assert not innovation.any()


@pytest.mark.parametrize("shape", sorted(SHAPES))
def test_the_radius_is_the_rate_at_which_errors_die(shape: str) -> None:
    """Simulated plant and observer side by side: the error shrinks per period by the reported radius."""
    rng = np.random.default_rng(7)
    network = tanks(SHAPES[shape](rng), rng)
    observer = observer_of(network)
    truth = anywhere(network, rng)
    x, estimate, sizes = truth.x, Estimate(np.zeros_like(truth.x), np.zeros_like(truth.w)), []
    everything = np.ones(network.size, dtype=bool)
    for _ in range(160):
        u = rng.normal(size=network.size)
        x = network.a @ x + network.b @ u + network.e @ truth.w
        estimate, _ = observer.correct(observer.predict(estimate, u, np.zeros(network.size)), network.c @ x, everything)
        sizes.append(np.linalg.norm(np.concatenate([x - estimate.x, truth.w - estimate.w])))
    rate = (max(sizes[110:120]) / max(sizes[30:40])) ** (1 / 80)
    assert 0 < observer.radius < 1
    assert rate == pytest.approx(observer.radius, abs=0.02)


def test_equal_sections_have_equal_gains() -> None:
    """Gains come from a section's own model alone, so all tanks of one make share theirs, whatever their neighbours."""
    network = zones(grid(2, 3), None)
    a = network.a.toarray()
    np.fill_diagonal(a, 0.8)
    alike = replace(network, a=type(network.a)(a))
    gains = observer_of(alike).gain_x.toarray()
    assert np.ptp(np.diag(gains)) == 0.0
    assert (gains == np.diag(np.diag(gains))).all()


def test_an_unstable_assembly_is_refused() -> None:
    """Sections that are fine alone but together run away from their filters are found by the check of the whole."""
    network = Network.from_matrices([[0.9, 0.8], [0.8, 0.9]], np.eye(2), states={"one": 1, "other": 1})
    shy = Noise(np.full(2, 10.0), np.full(2, 0.01), np.zeros(0))
    with pytest.raises(ObserverError, match=r"assembled observer is unstable: spectral radius 1\.\d+"):
        Observer.build(network, shy)


def test_a_disturbance_without_a_measurement_is_refused() -> None:
    """A section that measures nothing cannot estimate a disturbance; the error names it and both ways out."""
    network = Network.from_matrices(
        0.5 * np.eye(2), np.eye(2), states={"one": 1, "blind": 1}, c=[[1.0, 0.0]], outputs={"one": 1}, e=np.eye(2)
    )
    with pytest.raises(
        ObserverError, match=r"section 'blind' has 1 disturbance.*measures nothing; measure an output or"
    ):
        observer_of(network)


def test_an_output_that_does_not_show_the_disturbance_is_refused() -> None:
    """An integrating disturbance no output ever shows has no steady-state filter; the section is named."""
    network = Network.from_matrices(
        np.diag([0.5, 0.5]), np.eye(2), states={"one": 2}, inputs={"one": 2}, c=[[1.0, 0.0]], e=[[0.0], [1.0]]
    )
    with pytest.raises(ObserverError, match="section 'one' has no steady-state filter"):
        observer_of(network)


def test_a_section_without_measurement_and_disturbance_runs_on_its_model() -> None:
    """No output and nothing to estimate: the section's states are predicted only, and the assembly is stable."""
    network = Network.from_matrices(
        [[0.5, 0.1], [0.1, 0.5]], np.eye(2), states={"one": 1, "blind": 1}, c=[[1.0, 0.0]], outputs={"one": 1}
    )
    observer = observer_of(network)
    assert observer.gain_x.toarray()[1].tolist() == [0.0]
    assert observer.radius < 1


@given(st.integers(0, 10_000))
def test_seeding_explains_a_plant_at_rest(draw: int) -> None:
    """From levels and pump speeds at rest, every state is found: levels as shown, flows where the pumps hold them."""
    rng = np.random.default_rng(draw)
    network = tanks(SHAPES["row"](rng), rng)
    u = rng.normal(0, 20, network.size)
    rest = np.linalg.solve(np.eye(network.a.shape[0]) - network.a.toarray(), network.b @ u)
    np.testing.assert_allclose(seed(network, network.c @ rest, u), rest, rtol=1e-9, atol=1e-9)


def test_seeding_keeps_what_is_shown_even_away_from_rest() -> None:
    """Levels that are no equilibrium are taken as they are; flows follow the pumps."""
    network = tanks(row(2))
    found = seed(network, np.array([5.0, -3.0]), np.array([10.0, 0.0]))
    np.testing.assert_allclose(found, [5.0, 7.0, -3.0, 0.0], atol=1e-12)
