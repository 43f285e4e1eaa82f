"""Check 6: the tank's outlet law and its linearisation against a published laboratory process.

Source: "The quadruple-tank process: a multivariable laboratory process with an adjustable zero", IEEE Transactions on
Control Systems Technology 8 (2000) 456-465. Two pumps feed four tanks through two valves; tank 3 drains into 1, tank 4
into 2:

    A₁ dh₁/dt = −q₁ + q₃ + γ₁ k₁ v₁        A₃ dh₃/dt = −q₃ + (1 − γ₂) k₂ v₂        q_i = a_i √(2 g h_i)
    A₂ dh₂/dt = −q₂ + q₄ + γ₂ k₂ v₂        A₄ dh₄/dt = −q₄ + (1 − γ₁) k₁ v₁

    h level     v pump voltage     k pump gain     γ share of a pump's flow that a valve sends to the lower tank

Two ways for what it publishes about either operating point, time constants and zeros. Our linearisation, by complex
steps, is compared with closed forms to 1e-9. The published numbers are compared with the range that our linearisation
takes while levels, holes and valves move within the digits they are printed with: a published number is met when its
own digits overlap that range.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from itertools import product
from math import pi, sqrt
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from scipy.linalg import eigvals

from sim_plant.physics import Floats, Tank

Four = tuple[float, float, float, float]
Two = tuple[float, float]

G_CM = 981.0
AREAS: Four = (28.0, 32.0, 28.0, 32.0)
UPSTREAM = {0: 2, 1: 3}
"""Lower tank: the upper one that drains into it."""


@dataclass(frozen=True)
class Point:
    """An operating point as printed: cm, cm², V, cm³/(V s)."""

    levels: Four
    volts: Two
    gains: Two
    split: Two
    holes: Four = (0.071, 0.057, 0.071, 0.057)

    def tanks(self) -> list[Tank]:
        """Our tanks: a hole of the given area is a bore with a discharge coefficient of 1."""
        return [
            Tank(
                area=area * 1e-4,
                rim=0.2,
                outlet_bore=sqrt(4 * hole * 1e-4 / pi),
                pump_capacity=0.0,
                discharge=1.0,
                gravity=G_CM / 100,
            )
            for area, hole in zip(AREAS, self.holes, strict=True)
        ]

    def rates(self, levels_m: npt.NDArray[Any], volts: npt.NDArray[Any]) -> npt.NDArray[Any]:
        """dh/dt, m/s, (4,): the four balances, with our tanks doing the draining."""
        tanks = self.tanks()
        pumped = np.array(self.gains) * 1e-6 * volts
        (left, right), drained = self.split, [tank.outlet_flow(h) for tank, h in zip(tanks, levels_m, strict=True)]
        inflows = [
            left * pumped[0] + drained[2],
            right * pumped[1] + drained[3],
            (1 - right) * pumped[1],
            (1 - left) * pumped[0],
        ]
        nothing = np.zeros(1)
        return np.array(
            [
                tank.derivative(np.array([h, 0.0]), nothing, nothing, inflow)[0]
                for tank, h, inflow in zip(tanks, levels_m, inflows, strict=True)
            ]
        )

    def linear(self) -> tuple[Floats, Floats]:
        """A (4, 4) and B (4, 2) by complex steps."""
        h, v, step = np.array(self.levels) / 100, np.array(self.volts), 1e-30
        a = [np.imag(self.rates(h + step * 1j * unit, v)) / step for unit in np.eye(4)]
        b = [np.imag(self.rates(h + 0j, v + step * 1j * unit)) / step for unit in np.eye(2)]
        return np.array(a).T, np.array(b).T

    def time_constants(self) -> Floats:
        """Of the linearisation, s, (4,)."""
        slopes: Floats = np.diag(self.linear()[0])
        return -1 / slopes

    def zeros(self) -> Floats:
        """Transmission zeros from v to (h₁, h₂), 1/s, ascending: where the system matrix loses rank."""
        a, b = self.linear()
        c = np.eye(4)[:2]
        system = np.block([[a, b], [c, np.zeros((2, 2))]])
        shift = np.diag([1.0, 1, 1, 1, 0, 0])
        roots = eigvals(system, shift)
        return np.sort(np.real(roots[np.abs(roots) < 1e3]))

    def net_flows(self) -> Floats:
        """What the printed point leaves over in each tank, as a share of what drains from it, (4,)."""
        h = np.array(self.levels) / 100
        drained = np.array([float(tank.outlet_flow(level)) for tank, level in zip(self.tanks(), h, strict=True)])
        left_over: Floats = self.rates(h, np.array(self.volts)) * np.array(AREAS) * 1e-4 / drained
        return left_over


@dataclass(frozen=True)
class Published:
    """One operating point and what is printed about it."""

    point: Point
    time_constants_s: Four
    zeros: Two
    unbalanced: Four = (0.0, 0.0, 0.0, 0.0)
    """By how much of its flow a tank misses equilibrium even with every digit stretched; see the test that uses it."""


MINIMUM_PHASE = Published(
    Point(levels=(12.4, 12.7, 1.8, 1.4), volts=(3.00, 3.00), gains=(3.33, 3.35), split=(0.70, 0.60)),
    time_constants_s=(62, 90, 23, 30),
    zeros=(-0.060, -0.018),
    unbalanced=(0.0, 0.0, 0.02, 0.0),
)
OTHER = Published(
    Point(levels=(12.6, 13.0, 4.8, 4.9), volts=(3.15, 3.15), gains=(3.14, 3.29), split=(0.43, 0.34)),
    time_constants_s=(63, 91, 39, 56),
    zeros=(-0.057, 0.013),
)
BOTH = pytest.mark.parametrize("published", [MINIMUM_PHASE, OTHER], ids=["minimum-phase", "other"])


def corners(point: Point, moved: Mapping[str, tuple[tuple[int, ...], float]]) -> Iterator[Point]:
    """Every way of moving these components of these fields up or down by half of their last printed digit."""
    places = [(name, i, half) for name, (components, half) in moved.items() for i in components]
    for signs in product((-1, 1), repeat=len(places)):
        changed = {name: list(getattr(point, name)) for name in moved}
        for sign, (name, i, half) in zip(signs, places, strict=True):
            changed[name][i] += sign * half
        yield replace(point, **{name: tuple(values) for name, values in changed.items()})


@BOTH
def test_linearisation_has_the_closed_form_time_constants(published: Published) -> None:
    """T_i = (A_i / a_i) √(2 h_i / g), to 1e-9; they are the poles, since no lower tank acts on an upper one."""
    point = published.point
    closed = [
        area / hole * sqrt(2 * level / G_CM) for area, hole, level in zip(AREAS, point.holes, point.levels, strict=True)
    ]
    np.testing.assert_allclose(point.time_constants(), closed, rtol=1e-9)
    np.testing.assert_allclose(np.sort(np.real(eigvals(point.linear()[0]))), np.sort(-1 / np.array(closed)), rtol=1e-9)


@BOTH
def test_linearisation_has_the_closed_form_zeros(published: Published) -> None:
    """The determinant of the 2 × 2 transfer matrix vanishes where (1 + s T₃)(1 + s T₄) = (1 − γ₁)(1 − γ₂)/(γ₁ γ₂)."""
    point = published.point
    _, _, t3, t4 = point.time_constants()
    left, right = point.split
    ratio = (1 - left) * (1 - right) / (left * right)
    closed = np.sort(np.real(np.roots([t3 * t4, t3 + t4, 1 - ratio])))
    np.testing.assert_allclose(point.zeros(), closed, rtol=1e-9)


@BOTH
def test_published_time_constants(published: Published) -> None:
    """Each printed time constant overlaps the range that the printed level and hole leave open."""
    for i, printed in enumerate(published.time_constants_s):
        moved = {"levels": ((i,), 0.05), "holes": ((i,), 0.0005)}
        values = [point.time_constants()[i] for point in corners(published.point, moved)]
        assert min(values) - 0.5 <= printed <= max(values) + 0.5


@BOTH
def test_published_zeros(published: Published) -> None:
    """Each printed zero overlaps the range that the printed upper levels, upper holes and valve settings leave open."""
    moved = {"levels": ((2, 3), 0.05), "holes": ((2, 3), 0.0005), "split": ((0, 1), 0.005)}
    values = np.array([point.zeros() for point in corners(published.point, moved)])
    for printed, low, high in zip(published.zeros, values.min(axis=0), values.max(axis=0), strict=True):
        assert low - 0.0005 <= printed <= high + 0.0005


def test_valves_move_one_zero_across() -> None:
    """With γ₁ + γ₂ above 1 both zeros lie left, below 1 one lies right: the point of the process."""
    assert (MINIMUM_PHASE.point.zeros() < 0).all()
    assert np.sign(OTHER.point.zeros()).tolist() == [-1.0, 1.0]


@BOTH
@pytest.mark.parametrize("tank", range(4))
def test_published_point_is_an_equilibrium(published: Published, tank: int) -> None:
    """The balance of every tank closes within the digits printed.

    One does not: tank 3 of the minimum-phase point. Its printed 1.8 cm drain one per cent more than the most that the
    printed pump and valve can bring; the level that balances the printed flows is 1.63 cm.
    """
    upper = UPSTREAM.get(tank)
    mine = (tank,) if upper is None else (tank, upper)
    moved = {
        "levels": (mine, 0.05),
        "holes": (mine, 0.0005),
        "split": ((0, 1), 0.005),
        "gains": ((0, 1), 0.005),
    }
    left_over = [point.net_flows()[tank] for point in corners(published.point, moved)]
    unbalanced = published.unbalanced[tank]
    assert min(left_over) <= 0.0
    assert max(left_over) >= -unbalanced
    if unbalanced:
        assert max(left_over) < 0.0, "it balances: take the exception away"


@BOTH
def test_levels_that_balance_the_printed_flows_are_near_the_printed_ones(published: Published) -> None:
    """The other way round: the level at which a_i √(2 g h_i) is what pumps and valves bring, within 0.2 cm."""
    point = published.point
    (left, right), pumped = point.split, [k * v for k, v in zip(point.gains, point.volts, strict=True)]
    third, fourth = (1 - right) * pumped[1], (1 - left) * pumped[0]
    inflows = [left * pumped[0] + third, right * pumped[1] + fourth, third, fourth]
    one, two, three, four = ((q / hole) ** 2 / (2 * G_CM) for q, hole in zip(inflows, point.holes, strict=True))
    balanced = replace(point, levels=(one, two, three, four))
    np.testing.assert_allclose(balanced.levels, point.levels, rtol=0, atol=0.2)
    np.testing.assert_allclose(balanced.net_flows(), 0.0, atol=1e-12)
