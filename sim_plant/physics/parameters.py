"""How a physics describes its parameters, so that a plant file can be checked without knowing the physics."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import MISSING, dataclass, field, fields
from typing import Any

import numpy as np


@dataclass(frozen=True)
class Parameter:
    """One parameter: its SI unit ("" for none), its default (None when it must be given), and what it is."""

    name: str
    unit: str
    default: float | None
    description: str


def parameter(unit: str, description: str, default: float | None = None) -> Any:
    """Declare a field of a physics dataclass together with its unit and meaning."""
    metadata = {"unit": unit, "description": description}
    return field(metadata=metadata) if default is None else field(default=default, metadata=metadata)


def parameters_of(kind: type) -> tuple[Parameter, ...]:
    """List the parameters of a physics class, in the order of its fields."""
    return tuple(
        Parameter(
            name=item.name,
            unit=item.metadata["unit"],
            default=None if item.default is MISSING else item.default,
            description=item.metadata["description"],
        )
        for item in fields(kind)
    )


def require_positive(physics: object, names: Iterable[str]) -> None:
    """Check that these parameters, numbers or stacked arrays, are positive and finite.

    Raises:
        ValueError: names the parameter, its value and what is allowed.
    """
    for name in names:
        value = np.asarray(getattr(physics, name))
        if not (np.isfinite(value).all() and (value > 0).all()):
            raise ValueError(f"{type(physics).__name__.lower()} {name} is {value}; give a positive, finite number")
