"""What is worth knowing about a plant before it is designed for: where actuators are missing, what cannot be moved.

Each finding is a fact about the network, none is an error by itself:

    separate plants        no coupling joins them; they are designed side by side
    no actuator in reach   nothing within d couplings of a section can act: what happens there cannot be stopped nearby
    unstable               a section left alone does not settle: a mode lambda of A_ii with |lambda| >= 1
    uncontrollable         a mode lambda that no input moves: [A − lambda I, B] loses rank (Hautus test)

The last is asked twice: of every section, with its neighbours' states as further inputs, where a loss of rank is one of
the whole plant; and of every piece of up to `DENSE_LIMIT` states, for modes that do not settle, where it means that no
controller can hold the plant. Hautus, Indag. Math. 31 (1969) 443-448.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from enum import Enum

import numpy as np
from scipy import sparse
from scipy.sparse import csgraph

from controllers.arrays import Floats
from controllers.network import Network

DENSE_LIMIT = 400
"""Most states of a piece whose modes are looked for all together."""
RANK_TOLERANCE = 1e-9
MARGIN = 1e-9


class About(Enum):
    """What a finding is about."""

    PIECES = "separate plants"
    NO_ACTUATOR = "no actuator in reach"
    UNSTABLE = "unstable"
    UNCONTROLLABLE = "uncontrollable"


@dataclass(frozen=True)
class Finding:
    """One finding.

    Attributes:
        about: its kind.
        section: whom it concerns; for separate plants the first section of one of them.
        mode: the eigenvalue per period, None where it is not about a mode.
        text: one sentence with what to do.
    """

    about: About
    section: str
    mode: complex | None
    text: str


def advise(network: Network, locality: int) -> tuple[Finding, ...]:
    """Look a plant over for a locality; findings in the order of the head of this file, sections in order."""
    return (*_pieces(network), *_without_actuator(network, locality), *_unstable(network), *_uncontrollable(network))


def nearest_actuator(network: Network) -> Floats:
    """(N,) couplings from every section to the nearest that has an input which moves anything; infinite if none."""
    acts = np.flatnonzero(np.diff(sparse.csc_array(network.b).indptr))
    sections = np.unique(network.section_of_input()[acts])
    if len(sections) == 0:
        return np.full(network.size, np.inf)
    return np.asarray(
        csgraph.dijkstra(network.adjacency, directed=False, unweighted=True, indices=sections, min_only=True)
    )


def _pieces(network: Network) -> Iterator[Finding]:
    labels = network.piece_of
    if network.pieces == 1:
        return
    for piece in range(network.pieces):
        members = np.flatnonzero(labels == piece)
        name = network.names[members[0]]
        yield Finding(
            About.PIECES,
            name,
            None,
            f"section {name!r} begins a plant of {len(members)} section(s) by itself, one of {network.pieces}; "
            "couple them if they are one plant",
        )


def _without_actuator(network: Network, locality: int) -> Iterator[Finding]:
    away = nearest_actuator(network)
    for i in np.flatnonzero(away > locality):
        name = network.names[i]
        there = f"the nearest is {away[i]:.0f} couplings away" if np.isfinite(away[i]) else "its plant has none at all"
        yield Finding(
            About.NO_ACTUATOR,
            name,
            None,
            f"section {name!r} has no actuator within {locality} couplings: {there}; raise the locality or add one",
        )


def _unstable(network: Network) -> Iterator[Finding]:
    for i, name in enumerate(network.names):
        own = slice(int(network.x_at[i]), int(network.x_at[i + 1]))
        for mode in _distinct(np.linalg.eigvals(network.a[own, own].toarray())):
            if abs(mode) >= 1 - MARGIN:
                does = "drifts" if abs(mode) < 1 + MARGIN else f"grows by {100 * (abs(mode) - 1):.2g} % per period"
                yield Finding(
                    About.UNSTABLE,
                    name,
                    mode,
                    f"section {name!r} by itself does not settle: mode {_written(mode)} {does}; "
                    "keep an actuator of its own or a neighbour's in charge of it",
                )


def _uncontrollable(network: Network) -> Iterator[Finding]:
    said: set[tuple[int, complex]] = set()
    for i, name in enumerate(network.names):
        own = slice(int(network.x_at[i]), int(network.x_at[i + 1]))
        a, b = network.a[own], network.b[own]
        others = np.setdiff1d(np.unique(a.indices), np.arange(own.start, own.stop))
        moved = np.hstack([a[:, others].toarray(), b[:, np.unique(b.indices)].toarray()])
        for mode in _distinct(np.linalg.eigvals(a[:, own].toarray())):
            if _fixed(a[:, own].toarray(), moved, mode) is not None:
                said.add((i, mode))
                yield _cannot(name, mode)
    for piece in range(network.pieces):
        states = network.states_of(np.flatnonzero(network.piece_of == piece).astype(np.int64))
        if len(states) > DENSE_LIMIT:
            continue
        a, b = network.a[states][:, states].toarray(), network.b[states].toarray()
        for mode in _distinct(np.linalg.eigvals(a)):
            shape = _fixed(a, b, mode) if abs(mode) >= 1 - MARGIN else None
            if shape is None:
                continue
            i = _section_of(network, int(states[shape.argmax()]))
            if not any(j == i and abs(other - mode) < 1e-6 for j, other in said):
                yield _cannot(network.names[i], mode)


def _cannot(name: str, mode: complex) -> Finding:
    settles = abs(mode) < 1 - MARGIN
    return Finding(
        About.UNCONTROLLABLE,
        name,
        mode,
        f"mode {_written(mode)} of section {name!r} is moved by no input; "
        + ("it settles by itself" if settles else "it does not settle, and nothing can hold it: add an actuator"),
    )


def _fixed(a: Floats, b: Floats, mode: complex) -> Floats | None:
    """Left vector of a mode that b does not move, None when b moves it."""
    pencil = np.hstack([a - mode * np.eye(len(a)), b])
    left, values, _ = np.linalg.svd(pencil, full_matrices=False)
    if values[-1] > RANK_TOLERANCE * max(values[0], 1.0):
        return None
    return np.asarray(np.abs(left[:, -1]))


def _distinct(modes: Floats) -> list[complex]:
    """Eigenvalues, one of every conjugate pair and of every group that agrees to rounding, largest first."""
    out: list[complex] = []
    for mode in sorted((complex(mode) for mode in modes), key=lambda mode: (-abs(mode), -mode.real)):
        if mode.imag >= -1e-12 and not any(abs(mode - other) < 1e-7 * max(1.0, abs(mode)) for other in out):
            out.append(mode)
    return out


def _written(mode: complex) -> str:
    return f"{mode.real:.4g}" if abs(mode.imag) < 1e-9 else f"{mode.real:.4g} ± {abs(mode.imag):.4g}i"


def _section_of(network: Network, state: int) -> int:
    return int(np.searchsorted(network.x_at, state, side="right") - 1)
