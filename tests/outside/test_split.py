"""Check 3: the iteration (4) against the split written out on full matrices, by row and by column (arXiv:1909.10074).

Nothing is taken from the design but its rows: every contribution's projection is made here from the dynamics of the
whole plant, all sections, of which the columns outside its locality are struck out. Every state and input is a row, so
a contribution's rows are its trajectory, and what it may be is the solution set of

    M psi = R p,    M = [I − Z A, −B] without those columns,  R p = what x_i(0) and w_i push

    nearest allowed = v − V V' v + V S^-1 U' R p,    M = U S V'
"""

import numpy as np
import pytest

from controllers.arrays import Floats, Ints
from controllers.network import Network, span_indices
from controllers.plans import Iterate, Measured, Settings
from controllers.quantities import Of
from controllers.rows import RowData
from controllers.synthesis import Design
from tests.controllers.full_split import Nearest, Split, one_pass, summed
from tests.controllers.plants import SHAPES, anywhere, everything, tanks, zones

HORIZON, PASSES = 5, 60


def plant(kind: str, shape: str, relax: float) -> tuple[Design, np.random.Generator]:
    """A random plant of which every row is priced, some with targets, bands and limits."""
    rng = np.random.default_rng([ord(letter) for letter in kind + shape])
    graph = SHAPES[shape](rng)
    network = zones(graph, rng) if kind == "zones" else tanks(graph, rng, late=True, ts_s=2.0)
    settings = Settings(rho=0.5, relax=relax, tolerance_spans=0.0)
    design = Design.build(
        network, everything(network), horizon=HORIZON, locality=1 if kind == "zones" else 2, settings=settings
    )
    return design, rng


def numbers(design: Design, rng: np.random.Generator) -> RowData:
    """Random row numbers: inputs limited, states with a band."""
    count = design.table.count
    is_input = np.repeat([quantity.of is Of.INPUT for quantity in design.table.quantities], HORIZON)
    width = rng.uniform(0.1, 1.0, count)
    return RowData(
        price=rng.uniform(0.1, 1.0, count),
        target=rng.normal(0, 0.3, count),
        soft_price=np.where(is_input, 0.0, rng.uniform(0.0, 5.0, count)),
        soft_lower=np.where(is_input, -np.inf, -width),
        soft_upper=np.where(is_input, np.inf, width),
        lower=np.where(is_input, -width, -np.inf),
        upper=np.where(is_input, width, np.inf),
    )


def row_of(design: Design, of: Of) -> Ints:
    """(T, n) or (T, m) row of every state or input at every step."""
    first = [design.table.rows_of(q.name).start for q in design.table.quantities if q.of is of]
    return np.array(first)[None, :] + np.arange(HORIZON)[:, None]


class Contribution:
    """One section's trajectory, confined to its locality by striking out columns of the whole plant's dynamics."""

    def __init__(self, design: Design, network: Network, i: int, inside: Ints) -> None:
        n, eye, shift = network.a.shape[0], np.eye(HORIZON), np.eye(HORIZON, k=-1)
        whole = np.hstack(
            [np.kron(eye, np.eye(n)) - np.kron(shift, network.a.toarray()), -np.kron(eye, network.b.toarray())]
        )
        rows = np.concatenate([row_of(design, Of.STATE).reshape(-1), row_of(design, Of.INPUT).reshape(-1)])
        kept = np.isin(design.table.section[rows], inside)
        order = np.argsort(rows[kept])
        self.touched = rows[kept][order]
        left, values, right = np.linalg.svd(whole[:, kept][:, order], full_matrices=False)
        real = values > 1e-11 * values[0]
        self.rows_of_m = right[real]
        self.inverse = right[real].T @ (left[:, real].T / values[real, None])
        self.network, self.section = network, i

    def pushed(self, measured: Measured) -> Floats:
        """R p: what the section's own state and disturbance put into the dynamics of the whole plant."""
        net, section = self.network, np.array([self.section])
        x, w = np.zeros(net.a.shape[0]), np.zeros(net.e.shape[1])
        own_x, own_w = span_indices(net.x_at, section), span_indices(net.w_at, section)
        x[own_x], w[own_w] = measured.x[own_x], measured.w[own_w]
        out = np.tile(net.e @ w, HORIZON)
        out[: len(x)] += net.a @ x
        return out

    def nearest(self, measured: Measured) -> Nearest:
        """Projection onto the allowed contributions for this measurement."""
        least = self.inverse @ self.pushed(measured)
        return lambda rows: np.asarray(rows - self.rows_of_m.T @ (self.rows_of_m @ rows) + least)


def compare(found: Iterate, z: Floats, split: Split, touched: list[Ints]) -> None:
    """All three numbers of every row agree to 1e-12 of the largest."""
    expected = (z, summed(touched, split.column, len(z)), summed(touched, split.multiplier, len(z)))
    for numbers_found, truth in zip((found.z, found.y, found.l), expected, strict=True):
        np.testing.assert_allclose(numbers_found, truth, rtol=0, atol=1e-12 * max(1.0, float(np.abs(truth).max())))


@pytest.mark.parametrize("relax", [1.0, 1.6])
@pytest.mark.parametrize("shape", sorted(SHAPES))
@pytest.mark.parametrize("kind", ["tanks", "zones"])
def test_one_number_per_row_equals_all_copies(kind: str, shape: str, relax: float) -> None:
    """After 1, 2, 10 and 60 passes, cold, and again warm from every contribution's own shifted copies."""
    design, rng = plant(kind, shape, relax)
    table, network, settings = design.table, design.table.network, design.settings
    data = numbers(design, rng)
    contributions = [
        Contribution(design, network, i, inside) for i, inside in enumerate(network.localities(design.locality))
    ]
    touched = [contribution.touched for contribution in contributions]
    copies = np.bincount(np.concatenate(touched), minlength=table.count)
    assert (copies == design.copies).all()

    before: Iterate | None = None
    multipliers = tuple(np.zeros(len(rows)) for rows in touched)
    plan = np.zeros(table.count)
    for _ in range(2):
        measured = anywhere(network, rng)
        nearest = [contribution.nearest(measured) for contribution in contributions]
        column = [near(np.zeros(len(rows))) for near, rows in zip(nearest, touched, strict=True)]
        if before is not None:
            for _ in range(settings.pull_passes):
                pull = (plan - summed(touched, column, table.count)) / copies
                column = [near(part + pull[rows]) for near, part, rows in zip(nearest, column, touched, strict=True)]
        split, z = Split(tuple(column), multipliers), plan
        for done in range(PASSES):
            z, split = one_pass(split, touched, nearest, data, settings.rho, 1.0 if done == 0 else relax)
            if done + 1 in (1, 2, 10, PASSES):
                _, found = design.solve(measured, data, before, max_iterations=done + 1)
                compare(found, z, split, touched)
        before, plan = found, z[table.following]
        multipliers = tuple(
            shift(table.following, rows, part) for rows, part in zip(touched, split.multiplier, strict=True)
        )


def shift(following: Ints, rows: Ints, part: Floats) -> Floats:
    """One contribution's copies, one step later."""
    full = np.zeros(len(following))
    full[rows] = part
    return np.asarray(full[following][rows])
