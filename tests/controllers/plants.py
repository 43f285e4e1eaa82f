"""Plants for the tests of the numerics: invented, small, and random where a law must hold for all of them.

Three kinds of section, on any graph of couplings:

    zones   one state (a temperature), one input that acts at once; coupled by conduction
    tanks   two states (a level, a flow that lags behind its pump), one measured output, one disturbance
    mixed   one or two states, up to two inputs, no physics behind it: for laws that hold whatever the numbers are

A graph is a number of sections and a list of pairs; `SHAPES` makes rows, trees, grids and random graphs of a seed.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from math import inf

import numpy as np
from scipy import sparse

from controllers.arrays import Floats, Ints
from controllers.linearise import discretise
from controllers.network import Network, offsets
from controllers.plans import Measured
from controllers.quantities import Of, Quantity

Edges = list[tuple[int, int]]
Graph = tuple[int, Edges]


def row(size: int) -> Graph:
    """Sections in a row."""
    return size, [(i, i + 1) for i in range(size - 1)]


def tree(size: int, rng: np.random.Generator) -> Graph:
    """Every section but the first hangs on an earlier one, at most three on each."""
    room, edges = [3] * size, []
    for i in range(1, size):
        parent = int(rng.choice([j for j in range(i) if room[j] > 0]))
        room[parent] -= 1
        edges.append((parent, i))
    return size, edges


def grid(rows: int, columns: int) -> Graph:
    """Sections on a rectangular grid, coupled with those above, below and beside."""
    edges = [(r * columns + c, r * columns + c + 1) for r in range(rows) for c in range(columns - 1)]
    edges += [(r * columns + c, (r + 1) * columns + c) for r in range(rows - 1) for c in range(columns)]
    return rows * columns, edges


def random_graph(size: int, extra: int, rng: np.random.Generator) -> Graph:
    """A tree and `extra` more couplings."""
    _, edges = tree(size, rng)
    absent = [(i, j) for i in range(size) for j in range(i + 1, size) if (i, j) not in edges]
    chosen = rng.choice(len(absent), size=min(extra, len(absent)), replace=False)
    return size, edges + [absent[int(k)] for k in chosen]


SHAPES: dict[str, Callable[[np.random.Generator], Graph]] = {
    "row": lambda rng: row(int(rng.integers(5, 8))),
    "tree": lambda rng: tree(int(rng.integers(5, 8)), rng),
    "grid": lambda rng: grid(2, int(rng.integers(3, 5))),
    "random graph": lambda rng: random_graph(int(rng.integers(5, 8)), 2, rng),
}


def names_of(kind: str, size: int) -> list[str]:
    """Names of sections: zone-1, zone-2, ..."""
    return [f"{kind}-{i + 1}" for i in range(size)]


def zones(graph: Graph, rng: np.random.Generator | None = None) -> Network:
    """Heated zones, 1 s periods; without `rng` all are alike.

    States are temperatures (K), inputs heater powers (fraction), disturbances powers (fraction).
    """
    size, edges = graph
    vary = _varying(rng)
    a, heat = np.eye(size), np.diag(vary(0.5, size))
    a[np.diag_indices(size)] -= vary(0.03, size)
    for k, (i, j) in zip(vary(0.08, len(edges)), edges, strict=True):
        a[[i, j], [j, i]] += k
        a[[i, j], [i, j]] -= k
    return Network.from_matrices(a, heat, states=dict.fromkeys(names_of("zone", size), 1), e=heat)


def tanks(graph: Graph, rng: np.random.Generator | None = None, *, late: bool = False, ts_s: float = 0.5) -> Network:
    """Tanks with lagged pumps; without `rng` all are alike.

    Discretised exactly section by section, a pump moves its level a little within the same step. With `late` it does
    not before the next one (explicit Euler step): the lag that makes a locality of one coupling too small.

    States are level (cm) and pump flow (cm3/s), inputs pump speeds (%), disturbances flows drawn (cm3/s); outputs are
    levels.
    """
    size, edges = graph
    vary = _varying(rng)
    area, lag, outlet = vary(40.0, size), vary(2.0, size), vary(0.86, size)
    level, flow = 2 * np.arange(size), 2 * np.arange(size) + 1
    a, b, e, c = (
        np.zeros((2 * size, 2 * size)),
        *(np.zeros((2 * size, size)) for _ in range(2)),
        np.zeros((size, 2 * size)),
    )
    a[level, level], a[level, flow], a[flow, flow] = -outlet / area, 1 / area, -1 / lag
    b[flow, np.arange(size)], e[level, np.arange(size)], c[np.arange(size), level] = 0.7 / lag, -1 / area, 1.0
    for k, (i, j) in zip(vary(0.65, len(edges)), edges, strict=True):
        a[level[i], level[[i, j]]] += np.array([-k, k]) / area[i]
        a[level[j], level[[i, j]]] += np.array([k, -k]) / area[j]
    ad, bd, ed = (
        (np.eye(2 * size) + ts_s * a, ts_s * b, ts_s * e) if late else _exact(a, b, e, offsets([2] * size), ts_s)
    )
    return Network.from_matrices(ad, bd, states=dict.fromkeys(names_of("tank", size), 2), c=c, e=ed)


def mixed(graph: Graph, rng: np.random.Generator) -> Network:
    """Sections of random sizes and numbers; every second or so has no input, none is unstable by itself."""
    size, edges = graph
    names = names_of("section", size)
    n, m, r = rng.integers(1, 3, size), rng.integers(0, 3, size), rng.integers(0, 2, size)
    x_at, u_at, w_at = offsets(n.tolist()), offsets(m.tolist()), offsets(r.tolist())
    a, b, e = (np.zeros((x_at[-1], at[-1])) for at in (x_at, u_at, w_at))
    for i in range(size):
        own = slice(x_at[i], x_at[i + 1])
        a[own, own] = rng.normal(0, 0.4, (n[i], n[i]))
        b[own, u_at[i] : u_at[i + 1]] = rng.normal(0, 1, (n[i], m[i]))
        e[own, w_at[i] : w_at[i + 1]] = rng.normal(0, 1, (n[i], r[i]))
    for i, j in edges:
        a[x_at[i] : x_at[i + 1], x_at[j] : x_at[j + 1]] = rng.normal(0, 0.3, (n[i], n[j]))
        a[x_at[j] : x_at[j + 1], x_at[i] : x_at[i + 1]] = rng.normal(0, 0.3, (n[j], n[i]))
    return Network.from_matrices(
        a,
        b,
        states=dict(zip(names, n.tolist(), strict=True)),
        inputs=dict(zip(names, m.tolist(), strict=True)),
        e=e,
        disturbances=dict(zip(names, r.tolist(), strict=True)),
    )


def zone_quantities(network: Network, rng: np.random.Generator | None = None) -> list[Quantity]:
    """Temperatures priced with a soft band, heaters priced and limited."""
    vary = _varying(rng)
    quantities = []
    for name, price, width in zip(network.names, vary(1.0, network.size), vary(1.0, network.size), strict=True):
        quantities += [
            Quantity(f"{name}.temperature", name, Of.OUTPUT, span=8, price=price, soft=(-width, width), soft_price=4),
            Quantity(f"{name}.heater", name, Of.INPUT, span=4, price=0.05, hard=(-1.5 * width, 2.0)),
        ]
    return quantities


def tank_quantities(network: Network, rng: np.random.Generator | None = None) -> list[Quantity]:
    """Levels priced with a soft band, pumps limited, moves priced and limited."""
    vary = _varying(rng)
    quantities = []
    for name, price, most in zip(network.names, vary(1.0, network.size), vary(10.0, network.size), strict=True):
        quantities += [
            Quantity(f"{name}.level", name, Of.OUTPUT, (1,), 40, 3, price, soft=(-6, 6), soft_price=10),
            Quantity(f"{name}.pump", name, Of.INPUT, (1,), 100, 1, hard=(-49, 51)),
            Quantity(f"{name}.move", name, Of.MOVE, (1,), 100, 3, price=0.3, hard=(-most, most)),
        ]
    return quantities


def everything(network: Network, rng: np.random.Generator | None = None) -> list[Quantity]:
    """Every state and every input of every section as a quantity of its own, so that rows show whole trajectories."""
    quantities = []
    for i, name in enumerate(network.names):
        for of, at in ((Of.STATE, network.x_at), (Of.INPUT, network.u_at)):
            count = int(at[i + 1] - at[i])
            for k in range(count):
                mix = tuple(float(j == k) for j in range(count))
                weight = 1.0 if rng is None else float(rng.uniform(0.3, 3.0))
                quantities.append(Quantity(f"{name}.{of.value}-{k}", name, of, mix, weight=weight, price=1.0))
    return quantities


def anywhere(network: Network, rng: np.random.Generator, size: float = 1.0) -> Measured:
    """A random measurement; states and disturbances are normal with deviation `size`, inputs a fifth of that."""
    n, r, m = network.a.shape[0], network.e.shape[1], network.b.shape[1]
    return Measured(size * rng.normal(size=n), size * rng.normal(size=r), 0.2 * size * rng.normal(size=m))


def trajectory(network: Network, x: Floats, w: Floats, inputs: Floats) -> Floats:
    """Simulate (1) step by step; inputs (T, m), w (r,) or (T, r), returns states (T, n) at t = 1..T."""
    states = []
    for u, now in zip(inputs, np.broadcast_to(w, (len(inputs), network.e.shape[1])), strict=True):
        x = network.a @ x + network.b @ u + network.e @ now
        states.append(x)
    return np.array(states)


def rows_of_trajectory(
    network: Network, quantities: Sequence[Quantity], states: Floats, inputs: Floats, u_before: Floats
) -> Floats:
    """Rows of a simulated trajectory, in spans, written without the row table's sparse maps."""
    moves = np.diff(np.vstack([u_before, inputs]), axis=0)
    seen = {Of.OUTPUT: states @ network.c.toarray().T, Of.STATE: states, Of.INPUT: inputs, Of.MOVE: moves}
    at = {Of.OUTPUT: network.y_at, Of.STATE: network.x_at, Of.INPUT: network.u_at, Of.MOVE: network.u_at}
    parts = []
    for quantity in quantities:
        total = np.zeros(len(inputs))
        for term in quantity.terms:
            i = network.names.index(term.section)
            total += seen[term.of][:, at[term.of][i] : at[term.of][i + 1]] @ np.array(term.mix)
        parts.append(total / quantity.span)
    return np.concatenate(parts)


def unlimited(quantities: Sequence[Quantity]) -> list[Quantity]:
    """The same quantities without bands and limits."""
    return [replace(q, soft=(-inf, inf), soft_price=0.0, hard=(-inf, inf)) for q in quantities]


def _exact(a: Floats, b: Floats, e: Floats, x_at: Ints, ts_s: float) -> tuple[Floats, Floats, Floats]:
    """Discretise dense matrices with the package under test."""
    ad, bd, ed = discretise(sparse.csr_array(a), sparse.csr_array(b), sparse.csr_array(e), x_at, ts_s)
    return ad.toarray(), bd.toarray(), ed.toarray()


def _varying(rng: np.random.Generator | None) -> Callable[[float, int], Floats]:
    """Either the same number for all, or within a third of it."""

    def vary(middle: float, count: int) -> Floats:
        return np.full(count, middle) if rng is None else middle * rng.uniform(0.7, 1.3, count)

    return vary
