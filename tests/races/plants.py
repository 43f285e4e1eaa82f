"""The plants of the races: generated from a seed, our own invented data, two kinds that are hard in different ways.

    zones    heated zones in a row. One state each, a temperature (K above ambient plan); a heater (fraction of full
             power) whose value is free but whose moves are priced; hard input and move limits, soft temperature bands.
             Priced moves over a held input make the optimum slow to find: this is the harder kind.
    masses   masses on a line, joined by springs and dampers. Two states each, position (mm) and speed (mm/s); a force
             (N), priced and hard limited; soft position bands. Lightly damped, and nothing moves at once.

No two sections are alike unless asked for. A **course** is what a closed loop has to answer to: every period some
sections get another disturbance, and now and then some another target, so that a warm start helps but never suffices.

Row weights are the synthesis's own setting, found once by sweeping both kinds at N = 12: they hold for all N and T.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import sparse

from controllers import Network, Of, Quantity
from controllers.arrays import Floats
from controllers.linearise import discretise


@dataclass(frozen=True)
class Plant:
    """One generated plant.

    Attributes:
        kind: "zones" or "masses".
        network: sections in a row, deviations from rest.
        quantities: what is priced and limited.
        steered: the quantity of every section that has a target.
        disturbance: standard deviation of the disturbances, (r,).
        target: largest target, in the quantity's own units.
        start: standard deviation of the states that a course starts from.
    """

    kind: str
    network: Network
    quantities: tuple[Quantity, ...]
    steered: tuple[str, ...]
    disturbance: Floats
    target: float
    start: float


def zones(size: int, seed: int, *, alike: bool = False) -> Plant:
    """Heated zones in a row, periods of 10 s.

    A zone loses 1 % of its temperature to ambient per period and exchanges 6 % of the difference with each neighbour;
    its heater, full on, adds 1.5 K per period.
    """
    vary = _varying(seed, alike)
    own, exchange, heat = vary(0.01, size), vary(0.06, size - 1), vary(1.5, size)
    a = _row(1 - own, exchange)
    network = Network.from_matrices(
        a, sparse.diags_array(heat), states=_names("zone", size, 1), e=sparse.diags_array(heat)
    )
    price, band = vary(1.0, size), vary(1.0, size)
    quantities = []
    for name, q, half in zip(network.names, price, band, strict=True):
        quantities += [
            Quantity(
                f"{name}.temperature", name, Of.OUTPUT, span=20, weight=8, price=q, soft=(-half, half), soft_price=9
            ),
            Quantity(f"{name}.heater", name, Of.INPUT, span=1, weight=0.2, hard=(-0.5, 0.5)),
            Quantity(f"{name}.move", name, Of.MOVE, span=1, weight=5, price=0.3, hard=(-0.1, 0.1)),
        ]
    steered = tuple(f"{name}.temperature" for name in network.names)
    return Plant("zones", network, tuple(quantities), steered, np.full(size, 0.3), 3.0, 2.0)


def masses(size: int, seed: int, *, alike: bool = False) -> Plant:
    """Masses of 1 kg on a line, springs of 4 N/m and dampers of 0.3 N s/m between them, periods of 0.2 s.

    The ends hang on walls by a spring of their own; every mass has a disturbing force.
    """
    vary = _varying(seed, alike)
    weight, spring, damper = vary(1.0, size), vary(4.0, size + 1), vary(0.3, size + 1)
    eye = sparse.eye_array(size, format="csr")
    pull = -_stiffness(spring) / weight[:, None]
    drag = -_stiffness(damper) / weight[:, None]
    by_kind = sparse.block_array([[None, eye], [pull, drag]], format="csr")
    order = np.arange(2 * size).reshape(2, size).T.reshape(-1)
    a = sparse.csr_array(by_kind[order][:, order])
    rows, columns = 2 * np.arange(size) + 1, np.arange(size)
    force = sparse.csr_array((1.0 / weight, (rows, columns)), shape=(2 * size, size))
    ad, bd, ed = discretise(a, force, force, 2 * np.arange(size + 1), 0.2)
    network = Network.from_matrices(ad, bd, states=_names("mass", size, 2), e=ed)
    price, band = vary(1.0, size), vary(0.6, size)
    quantities = []
    for name, q, half in zip(network.names, price, band, strict=True):
        quantities += [
            Quantity(
                f"{name}.position",
                name,
                Of.STATE,
                (1, 0),
                span=4,
                weight=10,
                price=q,
                soft=(-half, half),
                soft_price=10,
            ),
            Quantity(f"{name}.speed", name, Of.STATE, (0, 1), span=4, weight=0.3, price=0.1),
            Quantity(f"{name}.force", name, Of.INPUT, span=2, weight=0.4, price=0.1, hard=(-1.0, 1.0)),
        ]
    steered = tuple(f"{name}.position" for name in network.names)
    return Plant("masses", network, tuple(quantities), steered, np.full(size, 1.6), 1.0, 1.0)


PLANTS: dict[str, Callable[..., Plant]] = {"zones": zones, "masses": masses}
LOCALITY = {"zones": 2, "masses": 2}


def _names(kind: str, size: int, states: int) -> dict[str, int]:
    return {f"{kind}-{i + 1}": states for i in range(size)}


def _row(diagonal: Floats, exchange: Floats) -> sparse.csr_array:
    """One period of sections that give their neighbours `exchange` times the difference."""
    given = np.concatenate([exchange, [0.0]]) + np.concatenate([[0.0], exchange])
    return sparse.csr_array(sparse.diags_array([exchange, diagonal - given, exchange], offsets=[-1, 0, 1]))


def _stiffness(strength: Floats) -> sparse.csr_array:
    """Force on every mass per displacement, springs 0 and N going to walls."""
    between = strength[1:-1]
    return sparse.csr_array(sparse.diags_array([-between, strength[:-1] + strength[1:], -between], offsets=[-1, 0, 1]))


def _varying(seed: int, alike: bool) -> Callable[[float, int], Floats]:
    """Either the same number for all, or within a third of it."""
    rng = np.random.default_rng(seed)

    def vary(middle: float, count: int) -> Floats:
        return np.full(count, middle) if alike else middle * rng.uniform(0.7, 1.3, count)

    return vary
