"""A plant of coupled sections as one sparse linear system in discrete time.

    x+ = A x + B u + E w,   y = C x                                                                  (1)

Symbols and sizes, for N sections and section i = 0..N-1:

    x   n   states of all sections, section i at x_at[i]:x_at[i+1]          A  n x n
    u   m   inputs                                  u_at                     B  n x m
    w   r   disturbances                            w_at                     E  n x r
    y   p   measured outputs                        y_at                     C  p x n

All four are deviations from an operating point, in whatever units the caller chose. Section j is a neighbour of
section i when A_ij, B_ij or E_ij is not zero, in either direction: influence is looked up both ways, because a
contribution both spreads along couplings and is confined against them.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from scipy import sparse
from scipy.sparse import csgraph

from controllers.arrays import Floats, Ints
from controllers.exceptions import NetworkError

Matrix = Floats | Sequence[Sequence[float]] | Any
"""Anything scipy.sparse can take: a dense array, nested lists, or a sparse array."""


def offsets(sizes: Sequence[int]) -> Ints:
    """Turn block sizes (N,) into block offsets (N+1,)."""
    return np.concatenate([[0], np.cumsum(np.asarray(sizes, dtype=np.int64))]).astype(np.int64)


@dataclass(frozen=True)
class Network:
    """Sections, their couplings and the matrices of (1); build it with `from_matrices`."""

    names: tuple[str, ...]
    x_at: Ints
    u_at: Ints
    w_at: Ints
    y_at: Ints
    a: sparse.csr_array
    b: sparse.csr_array
    e: sparse.csr_array
    c: sparse.csr_array

    @classmethod
    def from_matrices(
        cls,
        a: Matrix,
        b: Matrix,
        *,
        states: Mapping[str, int],
        inputs: Mapping[str, int] | None = None,
        c: Matrix | None = None,
        outputs: Mapping[str, int] | None = None,
        e: Matrix | None = None,
        disturbances: Mapping[str, int] | None = None,
    ) -> Network:
        """Build a network from whole-plant matrices and the number of states of every section.

        Args:
            a: A, (n, n).
            b: B, (n, m).
            states: states per section, in the order of the rows of A.
            inputs: inputs per section; one each when left out.
            c: C, (p, n); every state is measured when left out.
            outputs: outputs per section; one each when `c` is given and this is left out.
            e: E, (n, r); no disturbances when left out.
            disturbances: disturbances per section; one each when `e` is given and this is left out.

        Raises:
            NetworkError: sizes do not add up, a name is unknown, or a number is not finite.
        """
        names = tuple(states)
        ones = dict.fromkeys(names, 1)
        n = sum(states.values())
        x_at = _block_offsets("states", names, states)
        u_at = _block_offsets("inputs", names, ones if inputs is None else inputs)
        y_at = _block_offsets("outputs", names, states if c is None else (ones if outputs is None else outputs))
        w_at = _block_offsets(
            "disturbances",
            names,
            dict.fromkeys(names, 0) if e is None else (ones if disturbances is None else disturbances),
        )
        return cls(
            names=names,
            x_at=x_at,
            u_at=u_at,
            w_at=w_at,
            y_at=y_at,
            a=_checked("A", a, (n, n)),
            b=_checked("B", b, (n, int(u_at[-1]))),
            e=_checked("E", np.zeros((n, 0)) if e is None else e, (n, int(w_at[-1]))),
            c=_checked("C", sparse.eye_array(n) if c is None else c, (int(y_at[-1]), n)),
        )

    @property
    def size(self) -> int:
        """Number of sections N."""
        return len(self.names)

    def index(self, name: str) -> int:
        """Index of a section.

        Raises:
            NetworkError: there is no such section.
        """
        try:
            return self._index[name]
        except KeyError:
            known = ", ".join(self.names[:8]) + (", ..." if self.size > 8 else "")
            raise NetworkError(f"no section is called {name!r}; sections are {known}") from None

    @cached_property
    def _index(self) -> dict[str, int]:
        return {name: i for i, name in enumerate(self.names)}

    @cached_property
    def adjacency(self) -> sparse.csr_array:
        """(N, N) 0/1 symmetric pattern: who is coupled with whom, the diagonal included."""
        blocks = sparse.eye_array(self.size, format="csr")
        for matrix, at in ((self.a, self.x_at), (self.b, self.u_at), (self.e, self.w_at)):
            blocks = blocks + _block_pattern(matrix, self.x_at, at)
        return _pattern(blocks + blocks.T)

    def localities(self, d: int) -> list[Ints]:
        """L_i(d) of every section: the sorted sections at most d couplings away, itself included."""
        reach = sparse.eye_array(self.size, format="csr")
        for _ in range(d):
            reach = _pattern(reach @ self.adjacency)
        reach.sort_indices()
        return [reach.indices[reach.indptr[i] : reach.indptr[i + 1]].astype(np.int64) for i in range(self.size)]

    def distances(self, sections: Ints) -> Floats:
        """(len(sections), N) couplings between these sections and all; infinite between separate plants."""
        return np.asarray(csgraph.dijkstra(self.adjacency, directed=False, unweighted=True, indices=sections))

    @cached_property
    def pieces(self) -> int:
        """How many separate plants this network is."""
        return int(csgraph.connected_components(self.adjacency, directed=False, return_labels=False))

    @cached_property
    def piece_of(self) -> Ints:
        """(N,) which of the separate plants, 0..pieces−1, every section belongs to."""
        return np.asarray(csgraph.connected_components(self.adjacency, directed=False)[1], dtype=np.int64)

    def states_of(self, sections: Ints) -> Ints:
        """Positions in x of all states of these sections."""
        return span_indices(self.x_at, sections)

    def inputs_of(self, sections: Ints) -> Ints:
        """Positions in u of all inputs of these sections."""
        return span_indices(self.u_at, sections)

    def section_of_input(self) -> Ints:
        """Section of every input, (m,)."""
        return np.repeat(np.arange(self.size), np.diff(self.u_at))


def span_indices(at: Ints, blocks: Ints) -> Ints:
    """Concatenate the index ranges of these blocks."""
    if len(blocks) == 0:
        return np.zeros(0, dtype=np.int64)
    return np.concatenate([np.arange(at[i], at[i + 1]) for i in blocks]).astype(np.int64)


def _pattern(matrix: sparse.csr_array) -> sparse.csr_array:
    out = sparse.csr_array(matrix != 0, dtype=np.float64)
    out.eliminate_zeros()
    return out


def _block_pattern(matrix: sparse.csr_array, row_at: Ints, column_at: Ints) -> sparse.csr_array:
    """(N, N) count of nonzeros of `matrix` per block."""
    coo = matrix.tocoo()
    rows = np.searchsorted(row_at, coo.coords[0], side="right") - 1
    columns = np.searchsorted(column_at, coo.coords[1], side="right") - 1
    size = len(row_at) - 1
    return sparse.csr_array((np.ones(len(rows)), (rows, columns)), shape=(size, size))


def _block_offsets(what: str, names: tuple[str, ...], sizes: Mapping[str, int]) -> Ints:
    known = set(names)
    unknown = [name for name in sizes if name not in known]
    if unknown:
        raise NetworkError(f"{what}: {unknown[0]!r} is not a section; sections are named by `states`")
    counts = [sizes.get(name, 0) for name in names]
    for name, count in zip(names, counts, strict=True):
        if count < 0 or (what == "states" and count == 0):
            least = "one" if what == "states" else "zero"
            raise NetworkError(f"{what} of section {name!r}: {count} is not allowed; give {least} or more")
    return offsets(counts)


def _checked(letter: str, matrix: Matrix, shape: tuple[int, int]) -> sparse.csr_array:
    out = sparse.csr_array(matrix, dtype=np.float64)
    if out.shape != shape:
        raise NetworkError(
            f"{letter} is {out.shape[0]} x {out.shape[1]}, but the sections given make it {shape[0]} x {shape[1]}"
        )
    if not np.isfinite(out.data).all():
        coo = out.tocoo()
        bad = int(np.flatnonzero(~np.isfinite(coo.data))[0])
        raise NetworkError(
            f"{letter}[{coo.coords[0][bad]}, {coo.coords[1][bad]}] is {coo.data[bad]}; every entry must be finite"
        )
    out.eliminate_zeros()
    return out
