"""Localized responses of every section: how the plant may answer one section's state, and be confined doing it.

Section i's contribution psi_i = (x_{1..T}, u_{0..T-1}) lives on its locality L = L_i(d) and answers the parameters
p_i = (x_i(0), w_i, u_i(−1)), the disturbance held over the horizon:

    M psi_i = R p_i                                                                                 (3)

    x_{t+1} − A x_t − B u_t = E w_i                 dynamics inside L            t = 0..T−1
    A_out x_t + B_out u_t = −E_out w_i              influence just outside L     t = 0..T−1, zero in all

Seen through the rows (z = Q psi + Qp u_i(−1), scaled by the square root of their weights), all contributions are
H_i p_i + N_i v: `gain` H_i (rows_i x p_i) is the particular one of least norm, `basis` N_i (rows_i x k) is orthonormal
and spans everything the section is free to choose. Both are made once, before anything runs. Sections with the same
matrices share one basis.

With `forecast`, w_i is a sequence (T, r_i) instead of one held value, and R has T columns for each of its entries.

`||M H − R||` above tolerance means that section cannot be localized at this d. With actuator lag the small singular
values of M reach 1e-7 of the largest and are real, so rank is decided far below, on rows scaled to one, and the
residual has the last word. With `truncated`, a section that cannot be confined gives up its boundary rows: it plans as
if everybody outside its locality stood still, feedback does the rest, and what leaks out is reported.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy import sparse
from scipy.linalg import svd

from controllers.advice import nearest_actuator
from controllers.arrays import Floats, Ints
from controllers.exceptions import NotLocalizableError
from controllers.network import Network, span_indices
from controllers.rows import RowTable

RANK_TOLERANCE = 1e-11
RESIDUAL_TOLERANCE = 1e-7


@dataclass(frozen=True)
class Localizability:
    """Whether one section's response can be confined to its locality.

    Attributes:
        section: its name.
        locality: the d asked for.
        residual: relative residual of (3).
        boundary: the section just outside that would feel most of it, None when confined or when nothing is outside.
        leak: largest influence on a state just outside per unit of p_i, of the least response; 0 unless truncated.
        leak_per_span: largest influence on a state just outside per span of what the section chooses freely on top.
    """

    section: str
    locality: int
    residual: float
    boundary: str | None
    leak: float = 0.0
    leak_per_span: float = 0.0

    @property
    def localizable(self) -> bool:
        """Whether the residual of all rows that were kept is rounding."""
        return self.residual <= RESIDUAL_TOLERANCE


@dataclass(frozen=True)
class Response:
    """One section's contribution, seen through the rows it touches (weighted rows, see the package head).

    Attributes:
        rows: (k,) the rows it touches.
        gain: H_i, (k, number of parameters).
        basis: N_i, (k, freedom), orthonormal columns.
        report: whether it could be confined.
    """

    rows: Ints
    gain: Floats
    basis: Floats
    report: Localizability


def localized_responses(
    table: RowTable, locality: int, *, truncated: bool = False, forecast: bool = False
) -> tuple[Response, ...]:
    """Compute H_i and N_i of every section; sections with equal matrices are computed once and share their arrays.

    Args:
        table: the rows.
        locality: d.
        truncated: sections that cannot be confined give up their boundary rows instead.
        forecast: p_i holds a disturbance of its own for every step.
    """
    net = table.network
    seen: dict[bytes, _Solution] = {}
    responses = []
    for i, inside in enumerate(net.localities(locality)):
        problem = _Problem.build(table, i, inside, forecast)
        key = problem.key()
        if key not in seen:
            seen[key] = problem.solve(truncated)
        found = seen[key]
        named = net.names[problem.outside[found.worst]] if found.worst >= 0 and not found.confined else None
        report = Localizability(net.names[i], locality, found.residual, named, found.leak, found.leak_per_span)
        responses.append(Response(problem.rows, found.gain, found.basis, report))
    return tuple(responses)


def require_localizable(
    table: RowTable, responses: Sequence[Response], *, search_up_to: int = 8, forecast: bool = False
) -> None:
    """Check that every section is confined, or truncated.

    Raises:
        NotLocalizableError: names the sections, their boundary and the least locality that would do.
    """
    stuck = [response.report for response in responses if not response.report.localizable]
    if not stuck:
        return
    d = stuck[0].locality
    lines = [
        f"section {report.section!r} cannot be confined to {d} couplings: "
        f"{report.boundary or 'its own dynamics'} would feel it (residual {report.residual:.1e})"
        for report in stuck[:5]
    ]
    if len(stuck) > 5:
        lines.append(f"and {len(stuck) - 5} more")
    least = least_locality(table, d + 1, search_up_to, forecast=forecast)
    fix = f"set the locality to {least}" if least is not None else _lacking(table.network, stuck, search_up_to)
    raise NotLocalizableError("; ".join(lines) + f". Fix: {fix}")


def _lacking(network: Network, stuck: Sequence[Localizability], reach: int) -> str:
    """Why no locality helps, by name."""
    away = nearest_actuator(network)
    far = [i for i in range(network.size) if away[i] > reach]
    if not far:
        boundary = f" before {stuck[0].boundary!r} feels it" if stuck[0].boundary else ""
        return (
            f"no locality helps: {stuck[0].section!r} has too few inputs near it to stop what its states do{boundary}"
        )
    others = f" and {len(far) - 1} more" if len(far) > 1 else ""
    there = f"nearest {away[far[0]]:.0f} couplings away" if np.isfinite(away[far[0]]) else "its plant has none at all"
    return (
        f"no locality helps: some section lacks an actuator within reach: {network.names[far[0]]!r}{others} ({there})"
    )


def least_locality(table: RowTable, start: int, stop: int, *, forecast: bool = False) -> int | None:
    """Smallest d in start..stop at which every section is localizable, None when none is."""
    for d in range(start, stop + 1):
        if all(response.report.localizable for response in localized_responses(table, d, forecast=forecast)):
            return d
    return None


@dataclass(frozen=True)
class _Solution:
    """H, N, how well (3) holds, and which entry of `outside` feels most (−1: none)."""

    gain: Floats
    basis: Floats
    residual: float
    worst: int
    leak: float = 0.0
    leak_per_span: float = 0.0

    @property
    def confined(self) -> bool:
        return self.residual <= RESIDUAL_TOLERANCE and self.leak == 0.0


@dataclass(frozen=True)
class _Problem:
    """(3) of one section, dense and local: `m` M, `r` R, `q` and `qp` the row maps."""

    outside: Ints
    boundary_section: Ints
    rows: Ints
    m: Floats
    r: Floats
    q: Floats
    qp: Floats

    @classmethod
    def build(cls, table: RowTable, i: int, inside: Ints, forecast: bool) -> _Problem:
        net, steps = table.network, table.horizon
        xs, us = net.states_of(inside), net.inputs_of(inside)
        own_x = span_indices(net.x_at, np.array([i]))
        own_u, own_w = np.arange(net.u_at[i], net.u_at[i + 1]), np.arange(net.w_at[i], net.w_at[i + 1])
        a, b = net.a[xs][:, xs].toarray(), net.b[xs][:, us].toarray()
        outside_x, outside = _felt_outside(net, xs, us)
        a_out, b_out = net.a[outside_x][:, xs].toarray(), net.b[outside_x][:, us].toarray()
        e, e_out = net.e[xs][:, own_w].toarray(), net.e[outside_x][:, own_w].toarray()
        start = np.searchsorted(xs, own_x)

        eye, shift = np.eye(steps), np.eye(steps, k=-1)
        step = eye if forecast else np.ones((steps, 1))
        first = np.eye(steps, 1)
        dynamics = np.hstack([np.kron(eye, np.eye(len(xs))) - np.kron(shift, a), -np.kron(eye, b)])
        boundary = np.hstack([np.kron(shift, a_out), np.kron(eye, b_out)])
        none = np.zeros((steps * (len(xs) + len(outside_x)), len(own_u)))
        driven = np.vstack(
            [
                np.hstack([np.kron(first, a[:, start]), np.kron(step, e)]),
                -np.hstack([np.kron(first, a_out[:, start]), np.kron(step, e_out)]),
            ]
        )
        rows, q, qp = _local_rows(table, xs, us, own_u)
        return cls(
            outside=outside,
            boundary_section=np.tile(np.searchsorted(net.x_at, outside_x, side="right") - 1, steps),
            rows=rows,
            m=np.vstack([dynamics, boundary]),
            r=np.hstack([driven, none]),
            q=q,
            qp=np.hstack([np.zeros((len(rows), driven.shape[1])), qp]),
        )

    def key(self) -> bytes:
        """Equal keys mean equal H and N."""
        shapes = repr([array.shape for array in (self.m, self.r, self.q, self.qp)]).encode()
        return shapes + b"".join(np.ascontiguousarray(array).tobytes() for array in (self.m, self.r, self.q, self.qp))

    def solve(self, truncated: bool) -> _Solution:
        """Solve (3) with its boundary rows; without them where it must be truncated."""
        found, _ = self._solved(len(self.m))
        if not truncated or found.residual <= RESIDUAL_TOLERANCE:
            return found
        inside = len(self.m) - len(self.boundary_section)
        found, (particular, free) = self._solved(inside)
        seen, values, mixing = np.linalg.svd(self.q @ free, full_matrices=False)
        kept = values > 1e-10 * values.max(initial=0.0)
        by_span = free @ (mixing[kept].T / values[kept])
        least = particular - by_span @ (seen[:, kept].T @ (self.q @ particular + self.qp))
        misfit = self.m @ least - self.r
        per_span = self.m[inside:] @ by_span
        return replace(
            found,
            worst=self._worst_outside(misfit),
            leak=float(np.abs(misfit[inside:]).max(initial=0.0)),
            leak_per_span=float(np.linalg.norm(per_span, axis=1).max(initial=0.0)),
        )

    def _solved(self, count: int) -> tuple[_Solution, tuple[Floats, Floats]]:
        """Solve the first `count` rows of (3); also the least psi and the free ones, a column for each."""
        length = np.linalg.norm(self.m[:count], axis=1)
        kept = np.flatnonzero(length > 0)
        m, r = self.m[kept] / length[kept, None], self.r[kept] / length[kept, None]
        left, values, right = svd(m, full_matrices=True)
        rank = int((values > RANK_TOLERANCE * values[0]).sum())
        particular = right[:rank].T @ ((left[:, :rank].T @ r) / values[:rank, None])
        misfit = self.m[:count] @ particular - self.r[:count]
        residual = float(np.abs(misfit).max(initial=0.0) / max(np.abs(self.r).max(initial=0.0), 1e-300))
        basis = _orthonormal(self.q @ right[rank:].T)
        gain = self.q @ particular + self.qp
        gain = gain - basis @ (basis.T @ gain)
        worst = self._worst_outside(misfit) if count == len(self.m) else -1
        found = _Solution(np.ascontiguousarray(gain), np.ascontiguousarray(basis), residual, worst)
        return found, (particular, right[rank:].T)

    def _worst_outside(self, misfit: Floats) -> int:
        felt = np.abs(misfit[len(misfit) - len(self.boundary_section) :]).max(axis=1, initial=0.0)
        if not felt.any():
            return -1
        return int(np.searchsorted(self.outside, self.boundary_section[int(felt.argmax())]))


def _felt_outside(net: Network, xs: Ints, us: Ints) -> tuple[Ints, Ints]:
    """States outside `xs` that the states `xs` or inputs `us` act on directly, and their sections."""
    touched = np.zeros(net.a.shape[0], dtype=bool)
    for matrix, columns in ((net.a, xs), (net.b, us)):
        touched[matrix[:, columns].tocoo().coords[0]] = True
    touched[xs] = False
    states = np.flatnonzero(touched)
    return states, np.unique(np.searchsorted(net.x_at, states, side="right") - 1)


def _local_rows(table: RowTable, xs: Ints, us: Ints, own_u: Ints) -> tuple[Ints, Floats, Floats]:
    """Rows a contribution touches, and their weighted maps from psi and from u_i(−1)."""
    steps, (qx, qu, qp) = table.horizon, table.maps
    n, m = table.network.a.shape[0], table.network.b.shape[1]
    x_columns = (np.arange(steps)[:, None] * n + xs).reshape(-1)
    u_columns = (np.arange(steps)[:, None] * m + us).reshape(-1)
    local = sparse.csr_array(sparse.hstack([qx[:, x_columns], qu[:, u_columns]], format="csr"))
    before = qp[:, own_u]
    rows = np.flatnonzero((np.diff(local.indptr) > 0) | (np.diff(before.indptr) > 0)).astype(np.int64)
    scale = np.sqrt(table.weight[rows])[:, None]
    return rows, local[rows].toarray() * scale, before[rows].toarray() * scale


def _orthonormal(vectors: Floats) -> Floats:
    """Orthonormal basis of the columns' span."""
    if vectors.shape[1] == 0 or not vectors.any():
        return np.zeros((vectors.shape[0], 0))
    left, values, _ = svd(vectors, full_matrices=False)
    return np.asarray(left[:, values > 1e-10 * values[0]])
