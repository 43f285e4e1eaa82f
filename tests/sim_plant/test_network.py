"""Sections and couplings as one system: order, signs, kinds mixed at will, batches, complex numbers, misuse."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest

from sim_plant.network import Network
from sim_plant.physics import CouplingLaw, Floats, SectionPhysics, Tube
from tests.sim_plant.rigs import TANK, TUBE, MeteredTank, row


class Hose(Tube):
    """A second kind of coupling, so that two kinds must be kept apart."""


METERED = MeteredTank(area=60e-4, rim=0.3, outlet_bore=5e-3, pump_capacity=50e-6)
HOSE = Hose(bore=4e-3, length=0.5)
MIXED = Network(
    [("a", TANK), ("b", METERED), ("c", replace(TANK, area=80e-4)), ("d", METERED), ("e", TANK)],
    [("b", "a", TUBE), ("b", "c", HOSE), ("d", "c", TUBE), ("a", "b", HOSE)],
)
"""Two kinds of section, two of coupling, interleaved; a and b joined twice; e joined to nobody."""

X = np.array([0.2, 1e-5, 0.1, 2e-5, 0, 0, 0, 0.15, 0, 0.25, 3e-5, 0, 0, 0, 0.3, 4e-5])
U = np.array([0.3, 0.4, 0.5, 0.6, 0.7])
W = np.array([0.0, 1e-6, 2e-6, 0.0, 4e-6])


def longhand(network: Network, x: Floats, u: Floats, w: Floats) -> Floats:
    """The same derivative, one section and one coupling at a time."""
    parts = {name: x[network.x_at[i] : network.x_at[i + 1]] for i, name in enumerate(network.names)}
    kinds = dict(network.sections)
    inflow = dict.fromkeys(network.names, 0.0)
    for one, other, law in network.couplings:
        flow = float(law.flow(kinds[one].head(parts[one]), kinds[other].head(parts[other])))
        inflow[one] -= flow
        inflow[other] += flow
    return np.concatenate(
        [
            kinds[name].derivative(parts[name], u[i : i + 1], w[i : i + 1], np.array(inflow[name]))
            for i, name in enumerate(network.names)
        ]
    )


@pytest.mark.parametrize("network", [MIXED, row(1), row(2), row(8)], ids=["mixed", "one", "two", "row"])
def test_derivative_is_the_sum_of_its_sections(network: Network) -> None:
    """Stacking changes how it is computed, not what."""
    rng = np.random.default_rng(7)
    x = rng.uniform(0.01, 0.3, int(network.x_at[-1]))
    u, w = rng.uniform(0, 1, len(network.names)), rng.uniform(0, 1e-5, len(network.names))
    np.testing.assert_allclose(network.derivative(x, u, w), longhand(network, x, u, w), rtol=1e-12, atol=1e-18)


def test_offsets_follow_the_sections() -> None:
    """Two states for a tank, five for one with meters; one input, one disturbance, one output each."""
    assert MIXED.x_at.tolist() == [0, 2, 7, 9, 14, 16]
    assert MIXED.u_at.tolist() == MIXED.w_at.tolist() == MIXED.y_at.tolist() == [0, 1, 2, 3, 4, 5]


def test_tags_name_every_number() -> None:
    """A flat vector can be read by name."""
    assert MIXED.x_tags[7:9] == ("c.level", "c.pump_flow")
    assert (MIXED.u_tags[0], MIXED.w_tags[0], MIXED.y_tags[0]) == ("a.pump", "a.consumer", "a.level")


def test_pairs_name_neighbours_once() -> None:
    """Two couplings between the same sections make one pair of neighbours, whichever way they are listed."""
    assert MIXED.pairs == ((0, 1), (1, 2), (2, 3))


def test_outputs_follow_the_sections() -> None:
    """Levels in the order of the sections, whatever their kinds."""
    assert MIXED.outputs(X).tolist() == [0.2, 0.1, 0.15, 0.25, 0.3]


def test_coupling_flows_are_listed_as_given_and_signed_from_one_to_other() -> None:
    """The order of the couplings survives the sorting into kinds."""
    expected = [
        TUBE.conductance * (0.1 - 0.2),
        HOSE.conductance * (0.1 - 0.15),
        TUBE.conductance * (0.25 - 0.15),
        HOSE.conductance * (0.2 - 0.1),
    ]
    np.testing.assert_allclose(MIXED.coupling_flows(X), expected, rtol=1e-12)


def test_a_coupling_beyond_its_law_is_told() -> None:
    """Tubes with 10 cm across them are no longer laminar; the row's other tube is."""
    network = row(3)
    x = network.guess(np.array([0.30, 0.20, 0.19]), np.zeros(3))
    assert network.in_range(x).tolist() == [False, True]


def test_a_plant_without_couplings_is_its_sections() -> None:
    """Nothing flows where nothing joins."""
    alone = Network([("a", TANK), ("b", TANK)])
    assert alone.pairs == ()
    assert alone.coupling_flows(np.zeros(4)).shape == (0,)
    np.testing.assert_array_equal(
        alone.derivative(X[:4], U[:2], W[:2])[:2], TANK.derivative(X[:2], U[:1], W[:1], np.zeros(()))
    )


def test_couplings_neither_make_nor_lose_volume() -> None:
    """With pumps, outlets and consumers closed the stored volume stands still, whatever flows between."""
    closed = replace(TANK, outlet_bore=0.0)
    network = row(8, closed)
    x = network.guess(np.linspace(0.05, 0.35, 8) ** 2, np.zeros(8))
    rising = network.derivative(x, np.zeros(8), np.zeros(8))[::2] * closed.area
    assert np.abs(rising).max() > 1e-7
    assert rising.sum() == pytest.approx(0.0, abs=1e-18)


@pytest.mark.parametrize("network", [MIXED, row(3)], ids=["mixed", "row"])
def test_batch_axes_run_through(network: Network) -> None:
    """A leading axis of the state, of the inputs, or of both is a batch of plants."""
    rng = np.random.default_rng(3)
    n, m = int(network.x_at[-1]), len(network.names)
    x, u, w = rng.uniform(0.05, 0.3, (4, n)), rng.uniform(0, 1, (4, m)), np.zeros(m)
    together = network.derivative(x, u, w)
    np.testing.assert_array_equal(together, [network.derivative(x[i], u[i], w) for i in range(4)])
    one_state = network.derivative(x[0], u, w)
    np.testing.assert_array_equal(one_state, [network.derivative(x[0], u[i], w) for i in range(4)])
    np.testing.assert_array_equal(network.outputs(x), [network.outputs(x[i]) for i in range(4)])
    np.testing.assert_array_equal(network.clip(2 * x)[1], [network.clip(2 * x[i])[1] for i in range(4)])


@pytest.mark.parametrize("network", [MIXED, row(4)], ids=["mixed", "row"])
def test_complex_steps_agree_with_differences(network: Network) -> None:
    """The Jacobian by complex steps is that of the real derivative (central differences), and raises no warning."""
    rng = np.random.default_rng(5)
    n, m = int(network.x_at[-1]), len(network.names)
    x, u, w = rng.uniform(0.1, 0.2, n), rng.uniform(0.2, 0.8, m), np.full(m, 1e-6)
    steps, small = np.eye(n) * 1e-30j, np.eye(n) * 1e-5
    slopes = np.imag(network.derivative(x + steps, u, w)) / 1e-30
    differences = (network.derivative(x + small, u, w) - network.derivative(x - small, u, w)) / 2e-5
    np.testing.assert_allclose(slopes, differences, rtol=1e-7, atol=1e-8)


def test_clip_counts_by_section() -> None:
    """Lost and missing volumes stand where their sections do, across kinds."""
    x = X.copy()
    x[0], x[9] = 0.39, -0.01
    inside, lost, missing = MIXED.clip(x)
    assert (inside[0], inside[9]) == (0.38, 0.0)
    np.testing.assert_allclose(lost, [40e-6, 0, 0, 0, 0], atol=1e-18)
    np.testing.assert_allclose(missing, [0, 0, 0, 60e-6, 0], atol=1e-18)


@pytest.mark.parametrize(
    ("sections", "couplings", "message"),
    [
        ([], [], "sections is empty"),
        ([("a", TANK), ("a", TANK)], [], "'a' twice"),
        ([("a", TANK)], [("a", "b", TUBE)], "no section 'b'"),
        ([("a", TANK)], [("b", "a", TUBE)], "no section 'b'"),
        ([("a", TANK)], [("a", "a", TUBE)], "coupled to itself"),
    ],
)
def test_misuse_is_refused_by_name(
    sections: Sequence[tuple[str, SectionPhysics]], couplings: Sequence[tuple[str, str, CouplingLaw]], message: str
) -> None:
    """A plant that can't be is no plant, and the message says why."""
    with pytest.raises(ValueError, match=message):
        Network(sections, couplings)
