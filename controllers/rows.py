"""Rows: everything that is priced or limited, one number at one step of the horizon.

Every quantity (`controllers.quantities`) becomes T rows. Row r costs, in spans (value / span of the quantity),

    f_r(z) = q_r (z − c_r)² + s_r dist(z, [a_r, b_r])²    on  lo_r ≤ z ≤ hi_r                        (2)

q price, c target, [a, b] soft band with price s, [lo, hi] hard limits. Which rows there are is structure and belongs
to the design (`RowTable`); their numbers are data of one period (`RowData`) and may change at every solve.

State and output limits should be soft: a hard limit on a measured quantity is infeasible as soon as a disturbance
pushes the plant past it. Input and move limits should be hard: the plant cannot do more anyway.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
import numpy.typing as npt
from scipy import sparse

from controllers.arrays import Floats, Ints
from controllers.exceptions import RowError
from controllers.network import Network
from controllers.quantities import Of, Quantity, Term


@dataclass(frozen=True)
class RowData:
    """The numbers of (2) for every row, in spans: arrays of shape (R,)."""

    price: Floats
    target: Floats
    soft_price: Floats
    soft_lower: Floats
    soft_upper: Floats
    lower: Floats
    upper: Floats

    def cost(self, z: Floats) -> float:
        """Evaluate the sum of (2) at z, (R,) in spans, leaving hard limits aside."""
        outside = np.maximum(self.soft_lower - z, 0.0) + np.maximum(z - self.soft_upper, 0.0)
        return float(self.price @ (z - self.target) ** 2 + self.soft_price @ outside**2)


@dataclass(frozen=True)
class RowTable:
    """All rows of a design: quantities in the order of their sections, each with its T steps in a block.

    Rows are linear in the trajectory: z = Qx x_{1..T} + Qu u_{0..T-1} − (moves at t = 0) u_{-1}, see `maps`.
    """

    network: Network
    quantities: tuple[Quantity, ...]
    horizon: int

    @classmethod
    def build(cls, network: Network, quantities: Sequence[Quantity], horizon: int) -> RowTable:
        """Order the quantities by section and check them against the network.

        Raises:
            RowError: a name stands twice, a mix or a price sequence has the wrong length, or there is no row.
            NetworkError: a section is unknown.
        """
        if horizon < 2:
            raise RowError(f"horizon is {horizon}; give 2 steps or more")
        if not quantities:
            raise RowError("no quantity is priced or limited; give at least one")
        seen: set[str] = set()
        for quantity in quantities:
            if quantity.name in seen:
                raise RowError(f"quantity {quantity.name!r} stands twice; names must be unique")
            seen.add(quantity.name)
            _check_sizes(network, quantity, horizon)
        ordered = sorted(quantities, key=lambda quantity: network.index(quantity.section))
        return cls(network, tuple(ordered), horizon)

    @property
    def count(self) -> int:
        """Number of rows R."""
        return len(self.quantities) * self.horizon

    @cached_property
    def _position(self) -> dict[str, int]:
        return {quantity.name: k for k, quantity in enumerate(self.quantities)}

    def rows_of(self, name: str) -> slice:
        """Rows of one quantity, step by step.

        Raises:
            RowError: no quantity has this name.
        """
        if name not in self._position:
            raise RowError(f"no quantity is called {name!r}")
        first = self._position[name] * self.horizon
        return slice(first, first + self.horizon)

    @cached_property
    def section(self) -> Ints:
        """Section of every row, (R,)."""
        return np.repeat([self.network.index(q.section) for q in self.quantities], self.horizon).astype(np.int64)

    @cached_property
    def span(self) -> Floats:
        """Span of every row, (R,)."""
        return np.repeat([q.span for q in self.quantities], self.horizon).astype(float)

    @cached_property
    def weight(self) -> Floats:
        """Weight of every row in the norm of the split, (R,)."""
        return np.repeat([q.weight for q in self.quantities], self.horizon).astype(float)

    @cached_property
    def following(self) -> Ints:
        """(R,) the row one step later of the same quantity, the last row following itself: shifts a plan one period."""
        steps = np.minimum(np.arange(self.horizon) + 1, self.horizon - 1)
        return (np.arange(len(self.quantities))[:, None] * self.horizon + steps).reshape(-1).astype(np.int64)

    def data(self) -> RowData:
        """Return the usual numbers of all quantities, in spans."""
        per = {
            "price": [np.broadcast_to(q.price, self.horizon) for q in self.quantities],
            "target": [np.full(self.horizon, q.target / q.span) for q in self.quantities],
            "soft_price": [np.full(self.horizon, q.soft_price) for q in self.quantities],
            "soft_lower": [np.full(self.horizon, q.soft[0] / q.span) for q in self.quantities],
            "soft_upper": [np.full(self.horizon, q.soft[1] / q.span) for q in self.quantities],
            "lower": [np.full(self.horizon, q.hard[0] / q.span) for q in self.quantities],
            "upper": [np.full(self.horizon, q.hard[1] / q.span) for q in self.quantities],
        }
        return RowData(**{name: np.concatenate(parts).astype(float) for name, parts in per.items()})

    def retarget(self, data: RowData, targets: Mapping[str, float]) -> RowData:
        """Return `data` with other targets, in the quantities' own units."""
        target = data.target.copy()
        for name, value in targets.items():
            rows = self.rows_of(name)
            target[rows] = value / self.span[rows]
        return replace(data, target=target)

    def confine(self, data: RowData, limits: Mapping[str, tuple[npt.ArrayLike, npt.ArrayLike]]) -> RowData:
        """Return `data` with other hard limits: per quantity a lower and an upper value, one number or one per step.

        Equal limits hold an input at a known value, and everybody plans around it: nothing is factorised again.

        Raises:
            RowError: a lower limit lies above its upper one.
        """
        lower, upper = data.lower.copy(), data.upper.copy()
        for name, (low, high) in limits.items():
            rows = self.rows_of(name)
            lower[rows], upper[rows] = np.asarray(low) / self.span[rows], np.asarray(high) / self.span[rows]
            if not (lower[rows] <= upper[rows]).all():
                raise RowError(f"quantity {name!r}: hard limits {low!r} .. {high!r} are crossed; give lower <= upper")
        return replace(data, lower=lower, upper=upper)

    def require_within_reach(self, locality: int) -> None:
        """Check that every quantity's sections lie in each other's locality.

        Raises:
            RowError: names the quantity, two sections too far apart and the locality that would do.
        """
        for quantity in self.quantities:
            if not quantity.plus:
                continue
            sections = [self.network.index(term.section) for term in quantity.terms]
            distance = self.network.distances(np.array(sections))[:, sections]
            one, other = np.unravel_index(int(distance.argmax()), distance.shape)
            if distance[one, other] > locality:
                near, far = quantity.terms[int(one)].section, quantity.terms[int(other)].section
                apart = distance[one, other]
                fix = f"set the locality to {apart:.0f} or split it" if np.isfinite(apart) else "split it"
                raise RowError(
                    f"quantity {quantity.name!r} adds up {near!r} and {far!r}, which lie "
                    + (f"{apart:.0f} couplings apart" if np.isfinite(apart) else "in separate plants")
                    + f", beyond the locality {locality}; {fix}"
                )

    @cached_property
    def maps(self) -> tuple[sparse.csr_array, sparse.csr_array, sparse.csr_array]:
        """Qx (R, T n), Qu (R, T m), Qp (R, m): z = Qx x_{1..T} + Qu u_{0..T-1} + Qp u_{-1}, spans, time outermost."""
        net, steps = self.network, np.arange(self.horizon)[:, None]
        n, m = net.a.shape[0], net.b.shape[1]
        on_x, on_u, on_before = _Entries(), _Entries(), _Entries()
        for k, quantity in enumerate(self.quantities):
            row = k * self.horizon + steps
            for term in quantity.terms:
                columns, mix = _functional(net, term)
                mix = mix / quantity.span
                if term.of.ahead:
                    on_x.add(row, steps * n + columns, mix)
                    continue
                on_u.add(row, steps * m + columns, mix)
                if term.of is Of.MOVE:
                    on_u.add(row[1:], steps[:-1] * m + columns, -mix)
                    on_before.add(row[:1], columns, -mix)
        shapes = ((self.count, self.horizon * n), (self.count, self.horizon * m), (self.count, m))
        x, u, before = (part.matrix(shape) for part, shape in zip((on_x, on_u, on_before), shapes, strict=True))
        return x, u, before


class _Entries:
    """Entries of a sparse matrix as they come; those in the same place are added."""

    def __init__(self) -> None:
        self._rows, self._columns, self._values = ([np.zeros(0, dtype=np.int64)] for _ in range(3))

    def add(self, rows: Ints, columns: Ints, values: Floats) -> None:
        shape = np.broadcast_shapes(rows.shape, columns.shape)
        for kept, part in zip((self._rows, self._columns, self._values), (rows, columns, values), strict=True):
            kept.append(np.broadcast_to(part, shape).reshape(-1))

    def matrix(self, shape: tuple[int, int]) -> sparse.csr_array:
        places = (np.concatenate(self._rows), np.concatenate(self._columns))
        out = sparse.csr_array((np.concatenate(self._values), places), shape=shape, dtype=float)
        out.eliminate_zeros()
        return out


def _functional(net: Network, term: Term) -> tuple[Ints, Floats]:
    """Positions in x or u, and their coefficients, that give the term in the network's units."""
    i, mix = net.index(term.section), np.asarray(term.mix, dtype=float)
    if term.of is Of.OUTPUT:
        row = sparse.csr_array(mix[None, :]) @ net.c[net.y_at[i] : net.y_at[i + 1], :]
        return row.indices.astype(np.int64), np.asarray(row.data)
    at = net.x_at if term.of is Of.STATE else net.u_at
    return np.arange(at[i], at[i + 1]), mix


def _check_sizes(network: Network, quantity: Quantity, horizon: int) -> None:
    for term in quantity.terms:
        i = network.index(term.section)
        at = {Of.OUTPUT: network.y_at, Of.STATE: network.x_at, Of.INPUT: network.u_at, Of.MOVE: network.u_at}[term.of]
        have = int(at[i + 1] - at[i])
        if len(term.mix) != have:
            raise RowError(
                f"quantity {quantity.name!r}: mix has {len(term.mix)} coefficients, but section "
                f"{term.section!r} has {have} {term.of.value.replace('move', 'input')}s; give one each"
            )
    if np.ndim(quantity.price) == 1 and np.size(quantity.price) != horizon:
        raise RowError(
            f"quantity {quantity.name!r}: {np.size(quantity.price)} prices for {horizon} steps; "
            "give one number or one per step"
        )
