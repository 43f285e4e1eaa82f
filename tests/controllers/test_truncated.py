"""Tests of truncated designs: sections that cannot be confined leak, as reported, and feedback does the rest."""

import numpy as np
import pytest

from controllers.arrays import Floats, Ints
from controllers.exceptions import NotLocalizableError
from controllers.network import Network
from controllers.plans import Measured, Settings
from controllers.quantities import Of, Quantity
from controllers.responses import localized_responses
from controllers.rows import RowTable
from controllers.synthesis import Design
from tests.controllers.plants import everything, grid, row, tank_quantities, tanks, zone_quantities, zones
from tests.controllers.test_responses import outside, unfold


def influence(network: Network, inside: Ints, x: Floats, w: Floats, path: tuple[Floats, Floats]) -> Floats:
    """What a contribution does to every state just outside in one step, (T, states outside)."""
    states, inputs = path
    before = np.vstack([x, states[:-1]])
    reached = before @ network.a.T + inputs @ network.b.T + network.e @ w
    return np.asarray(reached[:, outside(network, inside)])


def test_the_leak_is_what_the_whole_plant_would_feel() -> None:
    """For every section, unit state or disturbance: its response obeys the dynamics inside; outside feels the leak."""
    network = tanks(grid(2, 4), np.random.default_rng(2), late=True)
    table = RowTable.build(network, everything(network), 5)
    leaking = 0
    for i, (response, inside) in enumerate(
        zip(localized_responses(table, 1, truncated=True), network.localities(1), strict=True)
    ):
        assert response.report.localizable
        most = 0.0
        for k in range(3):
            x, w = np.zeros(16), np.zeros(8)
            (x if k < 2 else w)[2 * i + k if k < 2 else i] = 1.0
            states, inputs = unfold(table, response.rows, response.gain[:, k])
            within = network.states_of(inside)
            before = np.vstack([x, states[:-1]])
            moved = before @ network.a.T + inputs @ network.b.T + network.e @ w
            np.testing.assert_allclose(moved[:, within], states[:, within], atol=1e-9)
            most = max(most, float(np.abs(influence(network, inside, x, w, (states, inputs))).max(initial=0.0)))
        assert response.report.leak == pytest.approx(most, abs=1e-9)
        leaking += response.report.leak > 0
        free = [
            influence(network, inside, np.zeros(16), np.zeros(8), unfold(table, response.rows, column))
            for column in response.basis.T
        ]
        felt = np.linalg.norm(np.array(free), axis=0).max(initial=0.0)
        if response.report.leak > 0:
            assert response.report.leak_per_span == pytest.approx(felt, abs=1e-9)
    assert leaking >= 4


def test_it_is_off_unless_asked_for() -> None:
    """Without asking, a plant that cannot be confined is refused; asked, its leaks are listed, worst first."""
    network = tanks(row(7), late=True)
    with pytest.raises(NotLocalizableError):
        Design.build(network, tank_quantities(network), horizon=6, locality=1)
    design = Design.build(network, tank_quantities(network), horizon=6, locality=1, truncated=True)
    assert {report.section for report in design.leaks} == set(network.names)
    assert [report.leak for report in design.leaks] == sorted((report.leak for report in design.leaks), reverse=True)
    near, far = network.localities(1), network.localities(2)
    for report in design.leaks:
        i = network.index(report.section)
        assert report.boundary is not None
        assert network.index(report.boundary) in set(far[i]) - set(near[i])


def test_sections_that_can_be_confined_stay_confined() -> None:
    """Asking for truncation changes nothing, bit for bit, where none is needed."""
    network = zones(row(5), np.random.default_rng(0))
    plain, asked = (
        Design.build(network, zone_quantities(network), horizon=5, locality=1, truncated=truncated)
        for truncated in (False, True)
    )
    assert asked.leaks == ()
    for one, other in zip(plain.responses, asked.responses, strict=True):
        assert (one.gain == other.gain).all()
        assert (one.basis == other.basis).all()
        assert one.report == other.report


def test_only_the_section_that_must_gives_up_its_boundary() -> None:
    """A zone without heater next to heated ones: at locality 0 those are confined by their own heater or not at all."""
    network = Network.from_matrices(
        [[0.9, 0.0], [0.2, 0.8]], [[1.0], [0.0]], states={"up": 1, "down": 1}, inputs={"up": 1, "down": 0}
    )
    quantities = [Quantity("up", "up", Of.STATE, price=1.0), Quantity("down", "down", Of.STATE, price=1.0)]
    design = Design.build(network, quantities, horizon=4, locality=0, truncated=True)
    (only,) = design.leaks
    assert (only.section, only.boundary) == ("up", "down")
    assert only.leak >= 0.2


def test_feedback_does_the_rest() -> None:
    """In closed loop, measured anew every period, a truncated design settles the plant that the exact one settles."""
    network = tanks(row(6), np.random.default_rng(1), late=True)
    start = 4.0 * np.random.default_rng(2).normal(size=12)
    costs = []
    for locality, truncated in ((1, True), (2, False)):
        design = Design.build(
            network,
            tank_quantities(network),
            horizon=8,
            locality=locality,
            truncated=truncated,
            settings=Settings(tolerance_spans=1e-5, max_iterations=4000),
        )
        x, u, before, cost = start, np.zeros(6), None, 0.0
        for _ in range(80):
            plan, before = design.solve(Measured(x, np.zeros(6), u), before=before)
            u = plan.inputs
            x = network.a @ x + network.b @ u
            cost += float(x[::2] @ x[::2])
        assert np.abs(x[::2]).max() < 0.05 * np.abs(start[::2]).max()
        costs.append(cost)
    assert costs[0] == pytest.approx(costs[1], rel=0.1)
