"""Tests of `controllers.synthesis`."""

from collections.abc import Callable
from dataclasses import dataclass, fields, replace
from math import inf, nan

import numpy as np
import pytest

from controllers.arrays import Floats
from controllers.exceptions import NotFiniteError, NotLocalizableError
from controllers.network import Network
from controllers.plans import Iterate, Measured, Outcome, Settings
from controllers.quantities import Of, Quantity
from controllers.row_rule import Region
from controllers.rows import RowData
from controllers.synthesis import Design
from tests.controllers.full_split import Nearest, Split, one_pass, summed
from tests.controllers.plants import (
    SHAPES,
    anywhere,
    row,
    tank_quantities,
    tanks,
    zone_quantities,
    zones,
)
from tests.controllers.solvers import best_plan, clarabel_solver, condensed, localized, piqp_solver

UNLIMITED = Settings(tolerance_spans=1e-10, max_iterations=40_000, chunk=50)


@dataclass(frozen=True)
class Kind:
    """A kind of plant and what the tests need to know of it."""

    network: Callable[..., Network]
    quantities: Callable[..., list[Quantity]]
    locality: int
    horizon: int
    size: float


KINDS = {
    "zones": Kind(zones, zone_quantities, 1, 6, 3.0),
    "tanks": Kind(tanks, tank_quantities, 2, 8, 12.0),
}


def design_of(kind: str, shape: str, seed: int, settings: Settings = UNLIMITED) -> tuple[Design, Measured]:
    """A random plant with its design, and a measurement that makes limits and bands bind."""
    rng = np.random.default_rng(seed)
    what = KINDS[kind]
    network = what.network(SHAPES[shape](rng), rng)
    quantities = what.quantities(network, rng)
    design = Design.build(network, quantities, horizon=what.horizon, locality=what.locality, settings=settings)
    return design, anywhere(network, rng, what.size)


def first_inputs(design: Design, rows: Floats) -> Floats:
    """First value of every input quantity, in spans."""
    names = [quantity.name for quantity in design.table.quantities if quantity.of is Of.INPUT]
    return np.array([rows[design.table.rows_of(name).start] for name in names])


def small() -> tuple[Design, Measured]:
    """Five equal zones in a row, all warm."""
    network = zones(row(5))
    design = Design.build(network, zone_quantities(network), horizon=6, locality=1, settings=UNLIMITED)
    return design, Measured(np.array([1.0, 3.0, -2.0, 0.5, -1.0]), np.zeros(5), np.zeros(5))


@pytest.mark.parametrize("kind", sorted(KINDS))
@pytest.mark.parametrize("shape", sorted(SHAPES))
@pytest.mark.parametrize("seed", [0, 1])
def test_unlimited_budget_finds_the_localized_and_the_whole_plant_optimum(kind: str, shape: str, seed: int) -> None:
    """Run to the end, the plan is the localized truth, and its first inputs are the whole plant's, to 1e-6 of span.

    The two optima agree because a plant whose sections can all be confined, each driven by inputs of its own, loses
    nothing by it: any input of any section, followed by that section's confined response to what it did, is one of its
    contributions, and these make up every plan, step by step.
    """
    design, measured = design_of(kind, shape, seed)
    data = design.data()
    plan, _ = design.solve(measured)
    truth = best_plan(piqp_solver, *localized(design, measured), data)
    whole = best_plan(clarabel_solver, *condensed(design.table, measured), data)
    assert plan.outcome is Outcome.CONVERGED
    np.testing.assert_allclose(plan.rows, truth, atol=1e-6)
    np.testing.assert_allclose(first_inputs(design, plan.rows), first_inputs(design, whole), atol=1e-6)
    assert data.cost(plan.rows) == pytest.approx(data.cost(whole), rel=1e-6)
    assert np.isclose(plan.rows, data.upper, atol=1e-9).any() or np.isclose(plan.rows, data.lower, atol=1e-9).any()


@pytest.mark.parametrize("kind", sorted(KINDS))
@pytest.mark.parametrize("iterations", [1, 2, 3, 10])
def test_hard_limits_hold_at_any_iteration_count(kind: str, iterations: int) -> None:
    """However early the solve is stopped, no row of the plan and no input is outside its hard limits, bit for bit.

    Odd row weights, whose square roots round, make no difference to that.
    """
    plain, measured = design_of(kind, "tree", 3)
    net, rng = plain.table.network, np.random.default_rng(iterations)
    odd = [replace(q, weight=float(rng.uniform(0.2, 5.0))) for q in plain.table.quantities]
    what = KINDS[kind]
    design = Design.build(net, odd, horizon=what.horizon, locality=what.locality, settings=UNLIMITED)
    wild = replace(measured, x=20 * measured.x, w=20 * measured.w)
    data = design.data()
    before = None
    for _ in range(3):
        plan, before = design.solve(wild, data, before, max_iterations=iterations)
        assert plan.iterations == iterations
        assert plan.outcome is Outcome.OUT_OF_ITERATIONS
        assert (plan.rows >= data.lower).all()
        assert (plan.rows <= data.upper).all()
        for quantity in design.table.quantities:
            if quantity.of is Of.INPUT:
                value = plan.inputs[net.index(quantity.section)]
                assert quantity.hard[0] <= value <= quantity.hard[1]


def copies_of(design: Design, measured: Measured) -> tuple[Split, list[Nearest]]:
    """Every contribution's least response as its column copy, no multipliers; and its projection."""
    net = design.table.network
    least = []
    for i, response in enumerate(design.responses):
        own = [
            values[at[i] : at[i + 1]]
            for values, at in ((measured.x, net.x_at), (measured.w, net.w_at), (measured.u_before, net.u_at))
        ]
        least.append(response.gain @ np.concatenate(own))

    def nearest(i: int) -> Nearest:
        basis = design.responses[i].basis
        return lambda rows: np.asarray(least[i] + basis @ (basis.T @ (rows - least[i])))

    zeros = tuple(np.zeros_like(part) for part in least)
    return Split(tuple(least), zeros), [nearest(i) for i in range(net.size)]


def weighted(design: Design, data: RowData) -> RowData:
    """Row numbers in weighted rows: the same costs of sqrt(weight) z."""
    weight = design.table.weight
    power = {"price": -1.0, "soft_price": -1.0}
    return RowData(**{f.name: getattr(data, f.name) * weight ** power.get(f.name, 0.5) for f in fields(data)})


@pytest.mark.parametrize("kind", sorted(KINDS))
@pytest.mark.parametrize("relax", [1.0, 1.6, 1.9])
def test_iteration_equals_the_full_split_cold_and_warm(kind: str, relax: float) -> None:
    """One number per row gives what the copies of all contributions give, pass for pass, over 60 passes.

    Cold from the first measurement; then warm from copies shifted by one period, every contribution's own.
    """
    passes = 60
    settings = Settings(rho=0.3, relax=relax, tolerance_spans=0.0)
    design, measured = design_of(kind, "random graph", 5, settings)
    table, touched = design.table, [response.rows for response in design.responses]
    data = weighted(design, design.data())
    split, nearest = copies_of(design, measured)
    before: Iterate | None = None
    for period in range(3):
        for done in range(passes):
            along = 1.0 if done == 0 else relax
            z, split = one_pass(split, touched, nearest, data, settings.rho, along)
            if done in (0, 1, 6, passes - 1):
                _, found = design.solve(measured, before=before, max_iterations=done + 1)
                y, l = (summed(touched, part, table.count) for part in (split.column, split.multiplier))  # noqa: E741
                np.testing.assert_allclose(found.z, z, rtol=0, atol=1e-12)
                np.testing.assert_allclose(found.y, y, rtol=0, atol=1e-12)
                np.testing.assert_allclose(found.l, l, rtol=0, atol=1e-12)
        before = found
        measured = anywhere(table.network, np.random.default_rng(period), KINDS[kind].size)
        split, nearest = shifted(design, split, z, measured)


def shifted(design: Design, split: Split, z: Floats, measured: Measured) -> tuple[Split, list[Nearest]]:
    """Shift every copy by one period, the column copies pulled from the new measurement to the shifted plan."""
    table = design.table
    fresh, nearest = copies_of(design, measured)
    touched, target = [response.rows for response in design.responses], z[table.following]
    copies = np.bincount(np.concatenate(touched), minlength=table.count)
    column = list(fresh.column)
    for _ in range(design.settings.pull_passes):
        pull = (target - summed(touched, column, table.count)) / copies
        column = [near(part + pull[rows]) for near, part, rows in zip(nearest, column, touched, strict=True)]
    multipliers = []
    for rows, part in zip(touched, split.multiplier, strict=True):
        full = np.zeros(table.count)
        full[rows] = part
        multipliers.append(full[table.following][rows])
    return Split(tuple(column), tuple(multipliers)), nearest


@pytest.mark.parametrize("kind", sorted(KINDS))
def test_warm_start_needs_fewer_passes(kind: str) -> None:
    """Handing the last iterate on saves passes in every period of a loop, and does not move the optimum."""
    design, measured = design_of(kind, "row", 2, Settings(tolerance_spans=1e-3, chunk=1, max_iterations=5000))
    net = design.table.network
    plan, before = design.solve(measured)
    for _ in range(6):
        x = net.a @ measured.x + net.b @ plan.inputs + net.e @ measured.w
        measured = Measured(x, measured.w, plan.inputs)
        cold, _ = design.solve(measured)
        plan, before = design.solve(measured, before=before)
        assert plan.outcome is cold.outcome is Outcome.CONVERGED
        assert plan.iterations < cold.iterations
        np.testing.assert_allclose(plan.rows, cold.rows, atol=0.02)


def test_weights_and_penalty_never_move_the_optimum() -> None:
    """Row weights, rho and relax are matters of speed: all end at the same plan."""
    network = zones(row(5), np.random.default_rng(4))
    quantities = zone_quantities(network)
    measured = anywhere(network, np.random.default_rng(4), 3.0)
    plans = []
    for weight, rho, relax in ((1.0, 0.3, 1.6), (5.0, 0.3, 1.6), (0.2, 2.0, 1.0), (1.0, 0.1, 1.9)):
        heavy = [replace(q, weight=weight) if q.of is Of.OUTPUT else q for q in quantities]
        settings = replace(UNLIMITED, rho=rho, relax=relax)
        plans.append(Design.build(network, heavy, horizon=5, locality=1, settings=settings).solve(measured)[0].rows)
    for other in plans[1:]:
        np.testing.assert_allclose(other, plans[0], atol=1e-7)


@pytest.mark.parametrize("kind", sorted(KINDS))
def test_a_held_input_is_planned_around_in_the_same_solve(kind: str) -> None:
    """Equal limits keep an input where it is, exactly, and the others find the optimum of the plant that is left."""
    design, strong = design_of(kind, "row", 1)
    measured = Measured(0.1 * strong.x, 0.1 * strong.w, 0.1 * strong.u_before)
    name = next(quantity.name for quantity in design.table.quantities[3:] if quantity.of is Of.INPUT)
    section = design.table.network.index(name.split(".")[0])
    value = float(measured.u_before[section])
    data = design.table.confine(design.data(), {name: (value, value)})
    plan, _ = design.solve(measured, data)
    free, _ = design.solve(measured)
    whole = best_plan(clarabel_solver, *condensed(design.table, measured), data)
    assert (plan.rows[design.table.rows_of(name)] == data.lower[design.table.rows_of(name)]).all()
    np.testing.assert_allclose(first_inputs(design, plan.rows), first_inputs(design, whole), atol=1e-6)
    neighbour = section + 1
    assert abs(first_inputs(design, plan.rows) - first_inputs(design, free.rows))[neighbour] > 1e-4


def test_targets_shift_the_plan() -> None:
    """The plan for a target elsewhere is the whole-plant optimum for it, and goes there rather than to zero."""
    design, measured = small()
    data = design.table.retarget(design.data(), {"zone-3.temperature": 0.8})
    plan, _ = design.solve(measured, data)
    whole = best_plan(clarabel_solver, *condensed(design.table, measured), data)
    np.testing.assert_allclose(plan.rows, whole, atol=1e-6)
    end = design.table.rows_of("zone-3.temperature").stop - 1
    assert plan.rows[end] * 8 > 0.5
    assert abs(design.solve(measured)[0].rows[end] * 8) < 0.2


def test_being_told_to_stop_ends_the_solve_out_of_time() -> None:
    """The caller is asked after every chunk with the passes run so far; its no ends the solve with the plan so far."""
    design, measured = small()
    design = replace(design, settings=replace(UNLIMITED, chunk=5))
    asked: list[int] = []

    def may_continue(passes: int) -> bool:
        asked.append(passes)
        return passes < 15

    plan, iterate = design.solve(measured, may_continue=may_continue)
    assert asked == [5, 10, 15]
    assert (plan.outcome, plan.iterations) == (Outcome.OUT_OF_TIME, 15)
    counted, same = design.solve(measured, max_iterations=15)
    assert counted.outcome is Outcome.OUT_OF_ITERATIONS
    assert (counted.rows == plan.rows).all()
    assert (same.y == iterate.y).all()


def test_no_passes_still_give_a_plan_within_limits() -> None:
    """With no iteration at all the free response, clipped, comes back."""
    design, measured = small()
    plan, _ = design.solve(measured, max_iterations=0)
    root = np.sqrt(design.table.weight)
    data = design.data()
    assert plan.iterations == 0
    assert (plan.rows == np.clip(design.free_response(measured) / root, data.lower, data.upper)).all()


def test_residuals_belong_to_sections() -> None:
    """Primal and change are the largest of each section's rows, and the converged plan's are under tolerance."""
    design, measured = small()
    plan, iterate = design.solve(measured, max_iterations=7)
    off = np.abs(iterate.z - iterate.y) / np.sqrt(design.table.weight)
    assert plan.primal.tolist() == [off[design.table.section == i].max() for i in range(5)]
    assert (plan.residual == np.maximum(plan.primal, plan.change)).all()
    assert plan.residual.max() > 1e-3
    done, _ = design.solve(measured)
    assert done.residual.max() <= UNLIMITED.tolerance_spans


def test_regions_say_at_which_limit_an_input_rests() -> None:
    """Hot zones cool at the lower limit, cold ones heat at the upper, the rest is free; by the input's own sign."""
    network = zones(row(9))
    quantities = [
        replace(q, mix=(-1.0,), hard=(-q.hard[1], -q.hard[0])) if q.name == "zone-9.heater" else q
        for q in zone_quantities(network)
    ]
    design = Design.build(network, quantities, horizon=5, locality=1, settings=UNLIMITED)
    x = np.array([60.0, 0, 0, 0, -60.0, 0, 0, 0, 60.0])
    plan, _ = design.solve(Measured(x, np.zeros(9), np.zeros(9)))
    assert [plan.region[i] for i in (0, 4, 8)] == [Region.LOWER, Region.UPPER, Region.LOWER]
    assert plan.inputs[[0, 4, 8]].tolist() == [-1.5, 2.0, -1.5]
    free = design.solve(Measured(0.01 * x, np.zeros(9), np.zeros(9)))[0]
    assert set(free.region) == {Region.FREE}


def test_an_input_shown_twice_keeps_the_limits_of_both() -> None:
    """A second quantity on an input, here a weak pull to rest without limits, cannot let it out of the first's."""
    network = zones(row(5))
    rest = [Quantity(f"{name}.rest", name, Of.INPUT, span=4, price=0.01) for name in network.names]
    design = Design.build(network, zone_quantities(network) + rest, horizon=5, locality=1)
    hot = Measured(np.full(5, 60.0), np.zeros(5), np.zeros(5))
    plan, _ = design.solve(hot, max_iterations=1)
    assert plan.inputs.tolist() == [-1.5] * 5
    assert set(plan.region) == {Region.LOWER}


def test_an_input_without_a_quantity_is_not_made_up() -> None:
    """Inputs that no quantity shows come back as NaN, not as a number nobody planned."""
    network = zones(row(3))
    quantities = [q for q in zone_quantities(network) if q.name != "zone-2.heater"]
    plan, _ = Design.build(network, quantities, horizon=4, locality=1).solve(
        anywhere(network, np.random.default_rng(0))
    )
    assert np.isnan(plan.inputs).tolist() == [False, True, False]


@pytest.mark.parametrize(
    ("field", "value", "message"),
    [
        ("x", nan, "state of section 'zone-4' is nan; hold the section or coast its estimate"),
        ("w", inf, "disturbance of section 'zone-4' is inf"),
        ("u_before", nan, "last input of section 'zone-4' is nan"),
    ],
)
def test_a_measurement_that_is_not_finite_is_refused(field: str, value: float, message: str) -> None:
    """The error names the section, what is wrong with it and what to do instead."""
    design, measured = small()
    spoiled = getattr(measured, field).copy()
    spoiled[3] = value
    with pytest.raises(NotFiniteError, match=message):
        design.solve(replace(measured, **{field: spoiled}))


@pytest.mark.parametrize(
    ("field", "value", "what"),
    [
        ("price", inf, "price"),
        ("target", nan, "target"),
        ("soft_price", nan, "soft price"),
        ("soft_lower", nan, "lower end of the soft band"),
        ("soft_upper", nan, "upper end of the soft band"),
        ("lower", nan, "lower hard limit"),
        ("upper", nan, "upper hard limit"),
    ],
)
def test_row_numbers_that_are_not_numbers_are_refused(field: str, value: float, what: str) -> None:
    """A NaN limit is refused by the quantity's name; it must never be read as no limit."""
    design, measured = small()
    data = design.data()
    spoiled = getattr(data, field).copy()
    spoiled[design.table.rows_of("zone-2.heater").start + 2] = value
    with pytest.raises(NotFiniteError, match=f"{what} of quantity 'zone-2.heater' is {value}; give a number"):
        design.solve(measured, replace(data, **{field: spoiled}))


def test_a_measurement_of_the_wrong_length_is_refused() -> None:
    """Shapes are checked before any number is used."""
    design, measured = small()
    with pytest.raises(NotFiniteError, match=r"states have shape \(4,\); the network wants \(5,\)"):
        design.solve(replace(measured, x=measured.x[:4]))


def test_overflow_is_an_outcome_that_writes_nothing_and_does_not_last() -> None:
    """Numbers too large to compute with end as NOT_FINITE with NaN inputs; the next period starts cold from it."""
    network = zones(row(5))
    fine = [replace(quantity, span=0.1 * quantity.span) for quantity in zone_quantities(network)]
    design = Design.build(network, fine, horizon=6, locality=1, settings=UNLIMITED)
    measured = anywhere(network, np.random.default_rng(1))
    with np.errstate(all="ignore"):
        plan, before = design.solve(replace(measured, x=np.full(5, 1.7e308)), max_iterations=5)
    assert plan.outcome is Outcome.NOT_FINITE
    assert np.isnan(plan.inputs).all()
    assert not before.finite
    again, _ = design.solve(measured, before=before)
    assert (again.rows == design.solve(measured)[0].rows).all()


def test_what_is_handed_in_is_never_modified() -> None:
    """Measurement, data and last iterate may be read-only, and are the same afterwards."""
    design, measured = small()
    data = design.data()
    _, before = design.solve(measured, max_iterations=10)
    kept = []
    for holder in (measured, data, before):
        for field in fields(holder):
            array = getattr(holder, field.name)
            array.flags.writeable = False
            kept.append((array, array.copy()))
    plan, after = design.solve(measured, data, before)
    assert plan.outcome is Outcome.CONVERGED
    for array, copy in kept:
        assert (array == copy).all()
    assert not any(np.shares_memory(getattr(after, name), getattr(before, name)) for name in ("z", "y", "l"))


def test_a_solve_leaves_nothing_behind() -> None:
    """The design is stateless: the same call gives the same bits, whatever was solved in between."""
    design, measured = small()
    one, _ = design.solve(measured)
    design.solve(anywhere(design.table.network, np.random.default_rng(9), 5.0))
    other, _ = design.solve(measured)
    assert (one.rows == other.rows).all()
    assert one.iterations == other.iterations


def test_a_plant_that_cannot_be_localized_is_refused_when_built() -> None:
    """No design comes out of a locality that is too small."""
    network = tanks(row(5), late=True)
    with pytest.raises(NotLocalizableError, match="set the locality to 2"):
        Design.build(network, tank_quantities(network), horizon=6, locality=1)


def test_a_lone_section_is_a_plant() -> None:
    """One section, no coupling: the synthesis is plain predictive control and equals its quadratic program."""
    network = tanks((1, []))
    design = Design.build(network, tank_quantities(network), horizon=6, locality=0, settings=UNLIMITED)
    measured = Measured(np.array([10.0, -3.0]), np.array([4.0]), np.array([5.0]))
    plan, _ = design.solve(measured)
    np.testing.assert_allclose(
        plan.rows, best_plan(piqp_solver, *condensed(design.table, measured), design.data()), atol=1e-7
    )
