"""Sections and couplings of one kind, stacked: how a network computes all of them in a few array operations.

A flat vector holds the numbers of all sections, one section after another. `Places` says where the sections of one kind
have theirs; `pick` gathers them for the kind's formula, `assemble` puts the answers of all kinds back.

Inflows are gathered, not scattered: a section adds up at most D couplings, D being the most that any section has.
`Incidence` lists them with their signs; a section that has fewer adds a flow times zero.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Any, Self

import numpy as np
import numpy.typing as npt

from sim_plant.physics import Array, CouplingLaw, Floats, SectionPhysics

Ints = npt.NDArray[np.int64]
Offsets = dict[str, Ints]
"""Where each section's part begins in the flat vectors "x", "u", "w", "y", (sections + 1,) each."""


@dataclass(frozen=True)
class Places:
    """Where some sections' numbers stand in a flat vector.

    Attributes:
        at: (sections of the kind,) or (sections of the kind, numbers of each).
        whole: whether they are the whole vector in order, so that no copy is needed.
    """

    at: Ints
    whole: bool

    @classmethod
    def of(cls, at: Ints, total: int) -> Self:
        """Return the places `at` in a vector of `total` numbers."""
        return cls(at, np.array_equal(at.reshape(-1), np.arange(total)))

    def pick(self, flat: Array) -> Array:
        """Gather (..., total) into (..., *at.shape)."""
        return flat.reshape(flat.shape[:-1] + self.at.shape) if self.whole else flat.take(self.at, axis=-1)

    def flatten(self, picked: Array) -> Array:
        """Lay (..., *at.shape) out as (..., at.size)."""
        return picked.reshape((*picked.shape[: picked.ndim - self.at.ndim], self.at.size))


def assemble(parts: Sequence[tuple[Places, Array]], total: int) -> Array:
    """Put the numbers of all kinds back into one flat vector, (..., total)."""
    flats = [places.flatten(picked) for places, picked in parts]
    if parts[0][0].whole:
        return flats[0]
    batch = np.broadcast_shapes(*(flat.shape[:-1] for flat in flats))
    out: Array = np.empty((*batch, total), np.result_type(*flats))
    for (places, _), flat in zip(parts, flats, strict=True):
        out[..., places.at.reshape(-1)] = flat
    return out


@dataclass(frozen=True)
class Kind:
    """All sections of one kind, stacked, with the places of their numbers and of themselves."""

    physics: SectionPhysics
    among: Places
    x: Places
    u: Places
    w: Places
    y: Places


def stack_sections(sections: Sequence[SectionPhysics], offsets: Offsets) -> tuple[Kind, ...]:
    """Stack sections of like type, kinds in the order of their first section."""
    members: dict[type[SectionPhysics], list[int]] = {}
    for i, section in enumerate(sections):
        members.setdefault(type(section), []).append(i)
    kinds = []
    for mine in members.values():
        among = np.array(mine, dtype=np.int64)
        x, u, w, y = (
            Places.of(at[among][:, None] + np.arange(at[among[0] + 1] - at[among[0]]), int(at[-1]))
            for at in (offsets[letter] for letter in "xuwy")
        )
        stacked = _stack([sections[i] for i in mine])
        kinds.append(Kind(stacked, Places.of(among, len(sections)), x, u, w, y))
    return tuple(kinds)


@dataclass(frozen=True)
class Joint:
    """All couplings of one kind, stacked.

    Attributes:
        one, other: index of the section at either end, (couplings of the kind,).
        listed: their places in the plant's list of couplings.
    """

    law: CouplingLaw
    one: Ints
    other: Ints
    listed: Ints


def stack_couplings(laws: Sequence[CouplingLaw], ends: Sequence[tuple[int, int]]) -> tuple[Joint, ...]:
    """Stack couplings of like type, kinds in the order of their first coupling."""
    members: dict[type[CouplingLaw], list[int]] = {}
    for k, law in enumerate(laws):
        members.setdefault(type(law), []).append(k)
    joints = []
    for mine in members.values():
        one, other = np.array([ends[k] for k in mine], dtype=np.int64).T
        joints.append(Joint(_stack([laws[k] for k in mine]), one, other, np.array(mine, dtype=np.int64)))
    return tuple(joints)


@dataclass(frozen=True)
class Incidence:
    """Which flows a section adds up: (sections, D) places among all flows, and +1, −1 or 0 for each."""

    flow: Ints
    sign: Floats

    @classmethod
    def of(cls, sections: int, joints: Sequence[Joint]) -> Self:
        """Return the incidence for flows in the order of the joints, one kind after another."""
        touching: list[list[tuple[int, float]]] = [[] for _ in range(sections)]
        k = 0
        for joint in joints:
            for one, other in zip(joint.one.tolist(), joint.other.tolist(), strict=True):
                touching[one].append((k, -1.0))
                touching[other].append((k, 1.0))
                k += 1
        most = max(map(len, touching))
        padded = np.array([mine + [(0, 0.0)] * (most - len(mine)) for mine in touching]).reshape(sections, most, 2)
        return cls(padded[..., 0].astype(np.int64), padded[..., 1])

    def inflow(self, flow: Array) -> Array:
        """Return what flows into each section, (..., sections), for flows (..., couplings)."""
        total: Array = np.add.reduce(flow.take(self.flow, axis=-1) * self.sign, axis=-1)
        return total


def _stack(alike: Sequence[Any]) -> Any:
    """One physics whose every parameter is the array of the members' own."""
    kind = type(alike[0])
    return kind(**{item.name: np.array([getattr(one, item.name) for one in alike], float) for item in fields(kind)})
