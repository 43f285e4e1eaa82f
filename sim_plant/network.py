"""Sections joined by couplings, as one set of differential equations.

    dx/dt = F(x, u, w),   y = h(x)

Flat vectors hold the sections one after another in the order given: section i owns x[x_at[i] : x_at[i + 1]], likewise
u, w and y. Axes before the last are a batch of cases. SI units throughout. Real or complex.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
import numpy.typing as npt

from sim_plant.physics import Array, CouplingLaw, Floats, SectionPhysics
from sim_plant.stacking import Incidence, Ints, Joint, Kind, assemble, stack_couplings, stack_sections


@dataclass(frozen=True)
class Network:
    """A plant's sections and couplings; the tables behind its methods are built once, with it.

    Attributes:
        sections: (name, physics), in the order of the flat vectors.
        couplings: (name of one section, of the other, law); a flow counts positive from one to the other.
        x_at, u_at, w_at, y_at: where each section's part begins in the flat vectors, (sections + 1,).
        pairs: indices (lower, higher) of sections that share a coupling, each pair once, sorted.
    """

    sections: Sequence[tuple[str, SectionPhysics]]
    couplings: Sequence[tuple[str, str, CouplingLaw]] = ()
    x_at: Ints = field(init=False, repr=False, compare=False)
    u_at: Ints = field(init=False, repr=False, compare=False)
    w_at: Ints = field(init=False, repr=False, compare=False)
    y_at: Ints = field(init=False, repr=False, compare=False)
    pairs: tuple[tuple[int, int], ...] = field(init=False, repr=False, compare=False)
    _kinds: tuple[Kind, ...] = field(init=False, repr=False, compare=False)
    _joints: tuple[Joint, ...] = field(init=False, repr=False, compare=False)
    _incidence: Incidence = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        """Check the names, then build the tables.

        Raises:
            ValueError: no sections, a name twice, or a coupling to nowhere or to itself.
        """
        sections, couplings = tuple(self.sections), tuple(self.couplings)
        _check(sections, couplings)
        index = {name: i for i, (name, _) in enumerate(sections)}
        ends = [(index[one], index[other]) for one, other, _ in couplings]
        physics = [kind for _, kind in sections]
        offsets = {
            "x": _offsets([kind.state_names for kind in physics]),
            "u": _offsets([kind.input_names for kind in physics]),
            "w": _offsets([kind.disturbance_names for kind in physics]),
            "y": _offsets([kind.output_names for kind in physics]),
        }
        joints = stack_couplings([law for _, _, law in couplings], ends)
        tables = {
            "sections": sections,
            "couplings": couplings,
            **{f"{letter}_at": at for letter, at in offsets.items()},
            "pairs": tuple(sorted({(min(pair), max(pair)) for pair in ends})),
            "_kinds": stack_sections(physics, offsets),
            "_joints": joints,
            "_incidence": Incidence.of(len(sections), joints),
        }
        for name, table in tables.items():
            object.__setattr__(self, name, table)

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Names of the sections, in order."""
        return tuple(name for name, _ in self.sections)

    @cached_property
    def x_tags(self) -> tuple[str, ...]:
        """Names of the numbers in x, "section.state"."""
        return tuple(f"{name}.{state}" for name, kind in self.sections for state in kind.state_names)

    @cached_property
    def u_tags(self) -> tuple[str, ...]:
        """Names of the numbers in u, "section.input"."""
        return tuple(f"{name}.{signal}" for name, kind in self.sections for signal in kind.input_names)

    @cached_property
    def w_tags(self) -> tuple[str, ...]:
        """Names of the numbers in w, "section.disturbance"."""
        return tuple(f"{name}.{signal}" for name, kind in self.sections for signal in kind.disturbance_names)

    @cached_property
    def y_tags(self) -> tuple[str, ...]:
        """Names of the numbers in y, "section.output"."""
        return tuple(f"{name}.{signal}" for name, kind in self.sections for signal in kind.output_names)

    def derivative(self, x: Array, u: Array, w: Array) -> Array:
        """Return dx/dt, (..., n), at states (..., n), inputs (..., m) and disturbances (..., l)."""
        inflow = self._inflow(x)
        rates = [
            (k.x, k.physics.derivative(k.x.pick(x), k.u.pick(u), k.w.pick(w), k.among.pick(inflow)))
            for k in self._kinds
        ]
        return assemble(rates, x.shape[-1])

    def outputs(self, x: Array) -> Array:
        """Return y, (..., p), at states (..., n)."""
        return assemble([(k.y, k.physics.outputs(k.x.pick(x))) for k in self._kinds], int(self.y_at[-1]))

    def guess(self, y: Floats, u: Floats) -> Floats:
        """Return rough states (n,) near outputs (p,), NaN where free, and inputs (m,): where a search may start."""
        return assemble([(k.x, k.physics.guess(k.y.pick(y), k.u.pick(u))) for k in self._kinds], int(self.x_at[-1]))

    def coupling_flows(self, x: Array) -> Array:
        """Return what each coupling carries from its one end to its other, (..., couplings)."""
        flow: Array = np.zeros((*x.shape[:-1], len(self.couplings)), x.dtype)
        for joint, mine in zip(self._joints, self._across(x, lambda law: law.flow), strict=True):
            flow[..., joint.listed] = mine
        return flow

    def in_range(self, x: Floats) -> npt.NDArray[np.bool_]:
        """Whether each coupling's law can be trusted in this state, (..., couplings)."""
        trusted = np.ones((*x.shape[:-1], len(self.couplings)), np.bool_)
        for joint, mine in zip(self._joints, self._across(x, lambda law: law.in_range), strict=True):
            trusted[..., joint.listed] = mine
        return trusted

    def clip(self, x: Floats) -> tuple[Floats, Floats, Floats]:
        """Apply every section's stops: states, (..., n), volume lost and volume missing, m³, (..., sections)."""
        stopped = [(k, *k.physics.clip(k.x.pick(x))) for k in self._kinds]
        return (
            assemble([(k.x, inside) for k, inside, _, _ in stopped], x.shape[-1]),
            assemble([(k.among, lost) for k, _, lost, _ in stopped], len(self.sections)),
            assemble([(k.among, missing) for k, _, _, missing in stopped], len(self.sections)),
        )

    def _across(self, x: Array, method: Callable[[CouplingLaw], Callable[[Array, Array], Array]]) -> list[Array]:
        """Ask every kind of coupling about the heads at its ends."""
        heads = [(k.among, k.physics.head(k.x.pick(x))) for k in self._kinds]
        at = assemble(heads, len(self.sections))
        return [method(j.law)(at.take(j.one, axis=-1), at.take(j.other, axis=-1)) for j in self._joints]

    def _inflow(self, x: Array) -> Array:
        """What couplings bring into each section, (..., sections)."""
        if not self._joints:
            return np.zeros(len(self.sections))
        flows = self._across(x, lambda law: law.flow)
        return self._incidence.inflow(flows[0] if len(flows) == 1 else np.concatenate(flows, axis=-1))


def _offsets(names: Sequence[tuple[str, ...]]) -> Ints:
    return np.concatenate([[0], np.cumsum([len(mine) for mine in names])]).astype(np.int64)


def _check(sections: Sequence[tuple[str, SectionPhysics]], couplings: Sequence[tuple[str, str, CouplingLaw]]) -> None:
    if not sections:
        raise ValueError("sections is empty; a plant needs one at least")
    kinds: dict[str, SectionPhysics] = {}
    for name, kind in sections:
        if name in kinds:
            raise ValueError(f"sections has {name!r} twice; give every section its own name")
        kinds[name] = kind
    for one, other, _ in couplings:
        here = f"coupling of {one!r} and {other!r}"
        for name in (one, other):
            if name not in kinds:
                raise ValueError(f"{here}: there is no section {name!r}; the sections are {', '.join(kinds)}")
        if one == other:
            raise ValueError(f"{here}: a section cannot be coupled to itself; name two sections")
