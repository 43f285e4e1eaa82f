"""The plant that is not there: sections and couplings as one nonlinear system, integrated with explicit state.

    dx/dt = f(x, u, w),  y = h(x)        flat vectors, sections in order; x_at, u_at, w_at, y_at are their offsets

Sections of one kind are stacked into arrays once, so that a step costs a few array operations whatever their number.
Integration: classical Runge-Kutta of fourth order with sub-steps; after each sub-step the physical stops apply, and
what went over a rim is counted.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from math import ceil
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import sparse

from sim_plant.physics import Array, CouplingLaw, SectionPhysics

Floats = npt.NDArray[np.float64]
Ints = npt.NDArray[np.int64]


@dataclass(frozen=True)
class PlantState:
    """State of the whole plant: x (n,), time, and per section the volume lost over the rim and demanded in vain, m3."""

    x: Floats
    time_s: float
    spilled_m3: Floats
    missing_m3: Floats


@dataclass(frozen=True)
class _Group:
    """All sections of one kind, stacked."""

    physics: SectionPhysics
    sections: Ints
    x: Ints
    u: Ints
    w: Ints
    y: Ints


class Network:
    """Sections and couplings; immutable after it is built.

    Raises:
        ValueError: a name stands twice, or a coupling ends at no section or at the section it starts from.
    """

    def __init__(
        self,
        sections: Sequence[tuple[str, SectionPhysics]],
        couplings: Sequence[tuple[str, str, CouplingLaw]],
    ) -> None:
        self.names = tuple(name for name, _ in sections)
        index = {name: i for i, name in enumerate(self.names)}
        if len(index) != len(self.names):
            raise ValueError("two sections have the same name; names must be unique")
        for one, other, _ in couplings:
            for end in (one, other):
                if end not in index:
                    raise ValueError(f"coupling {one} - {other}: no section is called {end!r}")
            if one == other:
                raise ValueError(f"coupling {one} - {other}: a section cannot be coupled to itself")
        kinds = [physics for _, physics in sections]
        self.x_at = _offsets([len(kind.state_names) for kind in kinds])
        self.u_at = _offsets([len(kind.input_names) for kind in kinds])
        self.w_at = _offsets([len(kind.disturbance_names) for kind in kinds])
        self.y_at = _offsets([len(kind.output_names) for kind in kinds])
        self.pairs = tuple((index[one], index[other]) for one, other, _ in couplings)
        self._groups = [self._group(kinds, kind) for kind in dict.fromkeys(type(kind) for kind in kinds)]
        self._laws = _stack_laws([law for _, _, law in couplings])
        self._one = np.array([one for one, _ in self.pairs], dtype=np.int64)
        self._other = np.array([other for _, other in self.pairs], dtype=np.int64)
        self._incidence = self._incidence_matrix()

    def derivative(self, x: Array, u: Array, w: Array) -> Array:
        """Evaluate f at states (..., n), inputs (..., m), disturbances (..., r)."""
        inflow = self._inflow(x)
        rates = np.empty(
            np.broadcast_shapes(x.shape[:-1], u.shape[:-1], w.shape[:-1]) + x.shape[-1:], dtype=np.result_type(x, u, w)
        )
        for group in self._groups:
            rates[..., group.x] = group.physics.derivative(
                x[..., group.x], u[..., group.u], w[..., group.w], inflow[..., group.sections]
            )
        return rates

    def outputs(self, x: Array) -> Array:
        """Evaluate h at states (..., n)."""
        y = np.empty((*x.shape[:-1], int(self.y_at[-1])), dtype=x.dtype)
        for group in self._groups:
            y[..., group.y] = group.physics.outputs(x[..., group.x])
        return y

    def coupling_flows(self, x: Array) -> Array:
        """Flow through every coupling from its first to its second section, m3/s, (..., couplings)."""
        heads = self._heads(x)
        flows = np.empty((*x.shape[:-1], len(self.pairs)), dtype=x.dtype)
        for places, law in self._laws:
            flows[..., places] = law.flow(heads[..., self._one[places]], heads[..., self._other[places]])
        return flows

    def clip(self, x: Floats) -> tuple[Floats, Floats, Floats]:
        """Apply the stops of every section: states, volume lost and volume missing per section, m3."""
        out, lost, missing = x.copy(), np.zeros(len(self.names)), np.zeros(len(self.names))
        for group in self._groups:
            out[group.x], lost[group.sections], missing[group.sections] = group.physics.clip(x[group.x])
        return out, lost, missing

    def guess(self, y: Floats, u: Floats) -> Floats:
        """Rough states near outputs y (p,), NaN where free, and inputs u (m,)."""
        x = np.empty(int(self.x_at[-1]))
        for group in self._groups:
            x[group.x] = group.physics.guess(y[group.y], u[group.u])
        return x

    def start(self, x: Floats) -> PlantState:
        """State at time zero, nothing spilled."""
        return PlantState(x.copy(), 0.0, np.zeros(len(self.names)), np.zeros(len(self.names)))

    def _heads(self, x: Array) -> Array:
        heads = np.empty((*x.shape[:-1], len(self.names)), dtype=x.dtype)
        for group in self._groups:
            heads[..., group.sections] = group.physics.head(x[..., group.x])
        return heads

    def _inflow(self, x: Array) -> Array:
        if not self.pairs:
            return np.zeros((*x.shape[:-1], len(self.names)), dtype=x.dtype)
        flows = self.coupling_flows(x)
        return np.asarray(
            (self._incidence @ flows.reshape(-1, len(self.pairs)).T).T.reshape(*x.shape[:-1], len(self.names))
        )

    def _incidence_matrix(self) -> Any:
        """(N, couplings): −1 where a flow leaves, +1 where it arrives; dense while that is faster."""
        count = len(self.pairs)
        matrix = sparse.csr_array(
            (np.repeat([-1.0, 1.0], count), (np.concatenate([self._one, self._other]), np.tile(np.arange(count), 2))),
            shape=(len(self.names), count),
        )
        return matrix.toarray() if len(self.names) <= 200 else matrix

    def _group(self, kinds: Sequence[SectionPhysics], kind: type) -> _Group:
        members = np.array([i for i, physics in enumerate(kinds) if type(physics) is kind], dtype=np.int64)
        places = [
            np.array([np.arange(at[i], at[i + 1]) for i in members], dtype=np.int64)
            for at in (self.x_at, self.u_at, self.w_at, self.y_at)
        ]
        return _Group(_stack([kinds[i] for i in members]), members, *places)


def advance(network: Network, state: PlantState, u: Floats, w: Floats, dt_s: float, substep_s: float) -> PlantState:
    """Integrate over dt_s with inputs (m,) and disturbances (r,) held, in equal sub-steps of at most substep_s.

    Raises:
        ValueError: a step is not positive.
    """
    if not (dt_s > 0 and substep_s > 0):
        raise ValueError(f"cannot integrate over {dt_s} s in sub-steps of {substep_s} s; both must be positive")
    count = max(1, ceil(dt_s / substep_s - 1e-9))
    h = dt_s / count
    x, lost, missing = state.x, state.spilled_m3, state.missing_m3
    for _ in range(count):
        k1 = network.derivative(x, u, w)
        k2 = network.derivative(x + h / 2 * k1, u, w)
        k3 = network.derivative(x + h / 2 * k2, u, w)
        k4 = network.derivative(x + h * k3, u, w)
        x, over, short = network.clip(x + h / 6 * (k1 + 2 * k2 + 2 * k3 + k4))
        lost, missing = lost + over, missing + short
    return PlantState(x, state.time_s + dt_s, lost, missing)


def _offsets(sizes: Sequence[int]) -> Ints:
    return np.concatenate([[0], np.cumsum(sizes)]).astype(np.int64)


def _stack(members: Sequence[Any]) -> Any:
    """One physics whose every parameter is the array of the members'."""
    kind = type(members[0])
    return kind(**{item.name: np.array([getattr(member, item.name) for member in members]) for item in fields(kind)})


def _stack_laws(laws: Sequence[Any]) -> list[tuple[Ints, Any]]:
    stacked = []
    for kind in dict.fromkeys(type(law) for law in laws):
        places = np.array([k for k, law in enumerate(laws) if type(law) is kind], dtype=np.int64)
        stacked.append((places, _stack([laws[k] for k in places])))
    return stacked
