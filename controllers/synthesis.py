"""The synthesis: the frozen design object, and the solve of one period.

Problem. Over the horizon, minimise the sum of all rows' costs (2) over plans that are sums of localized contributions,

    minimise  sum_r f_r(z_r)   subject to   z = sum_i S_i' (H_i p_i + N_i v_i)

Symbols, in weighted rows (value / span · sqrt(weight)):

    z  (R,)   row copy: obeys every hard limit exactly, whatever the iteration count. This is what is applied.
    y  (R,)   column copy: obeys the dynamics exactly
    l  (R,)   summed scaled multipliers
    n  (R,)   how many contributions touch each row
    G         sum_i S_i' N_i N_i' S_i, a constant of the plant; S_i picks the rows contribution i touches
    rho       penalty of the split; row r sees p_r = rho / n_r

Iteration, started from y0 = sum_i S_i' H_i p_i:

    a     = y − l
    z     = row rule (5) of a with weight p
    alpha = relax (z − a) / n                 one number per row: all that a neighbour ever needs
    g     = G alpha
    y    <- y + g
    l    <- (1 − relax) l + n alpha − g                                                             (4)

which is the alternating direction method of multipliers on the row copies and column copies of all contributions
(split by rows and columns: arXiv:1909.10074; over-relaxation: Boyd et al., Found. Trends Mach. Learn. 3 (2011) 1-122,
section 3.4.3), reduced to one scalar per row because the row step moves all copies of a row by the same scalar. The
multipliers of the copies enter (4) through their sum alone as long as N_i' times those of contribution i is zero. Every
column step makes it so; shifting a plan by one period undoes it, therefore the first pass of a solve runs with relax
= 1, where it does not matter. The matrix form, with copies of its own for every contribution, stands in the tests, and
(4) equals it to rounding.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from controllers import kernels
from controllers.arrays import Floats, Ints
from controllers.ending import plan_of
from controllers.exceptions import ForecastError, RowError
from controllers.finite import require_finite
from controllers.network import Network
from controllers.plans import Iterate, Measured, Outcome, Plan, Settings
from controllers.quantities import Quantity
from controllers.responses import Localizability, Response, localized_responses, require_localizable
from controllers.rows import RowData, RowTable


@dataclass(frozen=True)
class _Flat:
    """All responses side by side, as the kernels read them."""

    touched: Ints
    at: Ints
    basis: Floats
    basis_at: Ints
    freedom: Ints

    @classmethod
    def of(cls, responses: Sequence[Response]) -> _Flat:
        place: dict[int, int] = {}
        parts: list[Floats] = []
        length = 0
        for response in responses:
            if id(response.basis) not in place:
                place[id(response.basis)] = length
                parts.append(response.basis.reshape(-1))
                length += response.basis.size
        return cls(
            touched=np.concatenate([response.rows for response in responses]),
            at=np.concatenate([[0], np.cumsum([len(response.rows) for response in responses])]).astype(np.int64),
            basis=np.concatenate(parts),
            basis_at=np.array([place[id(response.basis)] for response in responses], dtype=np.int64),
            freedom=np.array([response.basis.shape[1] for response in responses], dtype=np.int64),
        )


@dataclass(frozen=True)
class Design:
    """Everything that can be known before the first measurement; frozen, and safe to share between threads.

    Attributes:
        table: network, quantities and their rows.
        locality: d.
        settings: of the iteration.
        responses: of every section.
        copies: n.
        flat: the responses as the kernels read them.
        forecast: whether disturbances may differ from step to step.
    """

    table: RowTable
    locality: int
    settings: Settings
    responses: tuple[Response, ...]
    copies: Floats
    flat: _Flat
    forecast: bool = False

    @classmethod
    def build(
        cls,
        network: Network,
        quantities: Sequence[Quantity],
        *,
        horizon: int,
        locality: int,
        settings: Settings | None = None,
        truncated: bool = False,
        forecast: bool = False,
    ) -> Design:
        """Build the design of a plant.

        Args:
            network: the plant, (1).
            quantities: what is priced or limited.
            horizon: T, in periods.
            locality: d, in couplings.
            settings: of the iteration.
            truncated: let sections leak that cannot be confined; `leaks` says how much. Feedback does the rest.
            forecast: accept disturbances (T, r) as well as (r,); the responses hold T times as many columns for them.

        Raises:
            RowError: a quantity does not fit the network or reaches beyond the locality.
            NotLocalizableError: some section cannot be confined to its locality; the message has the least that works.
        """
        table = RowTable.build(network, quantities, horizon)
        table.require_within_reach(locality)
        responses = localized_responses(table, locality, truncated=truncated, forecast=forecast)
        require_localizable(table, responses, forecast=forecast)
        return cls.assemble(table, locality, settings or Settings(), responses, forecast=forecast)

    @classmethod
    def assemble(
        cls, table: RowTable, locality: int, settings: Settings, responses: Sequence[Response], *, forecast: bool
    ) -> Design:
        """Put a design together from responses that were computed before.

        Raises:
            RowError: a quantity shows nothing of the plant, so that no response touches its rows.
        """
        flat = _Flat.of(responses)
        copies = np.bincount(flat.touched, minlength=table.count).astype(float)
        if not copies.all():
            blind = table.quantities[int(copies.argmin()) // table.horizon]
            raise RowError(
                f"quantity {blind.name!r} shows nothing of the plant, its coefficients meet only zeros; drop it"
            )
        return cls(table, locality, settings, tuple(responses), copies, flat, forecast)

    @property
    def leaks(self) -> tuple[Localizability, ...]:
        """Reports of the sections that were truncated, worst first; empty when every section is confined."""
        leaking = [response.report for response in self.responses if response.report.leak > 0]
        return tuple(sorted(leaking, key=lambda report: -report.leak))

    def data(self) -> RowData:
        """Return the usual prices, targets and limits, in spans."""
        return self.table.data()

    def free_response(self, measured: Measured) -> Floats:
        """Return y0, the plan that answers the measurement with least norm, weighted rows (R,)."""
        net = self.table.network
        y = np.zeros(self.table.count)
        steps = self.table.horizon if self.forecast else 1
        w = np.broadcast_to(measured.w, (steps, net.e.shape[1]))
        for i, response in enumerate(self.responses):
            p = np.concatenate(
                [
                    measured.x[net.x_at[i] : net.x_at[i + 1]],
                    w[:, net.w_at[i] : net.w_at[i + 1]].reshape(-1),
                    measured.u_before[net.u_at[i] : net.u_at[i + 1]],
                ]
            )
            y[response.rows] += response.gain @ p
        return y

    def project(self, source: Floats) -> Floats:
        """Return G applied to weighted rows, (R,)."""
        out = np.empty_like(source)
        flat = self.flat
        kernels.project(source, out, flat.touched, flat.at, flat.basis, flat.basis_at, flat.freedom)
        return out

    def warm(self, y0: Floats, before: Iterate) -> Iterate:
        """Shift the last plan by one period and pull it onto the new measurement."""
        later = self.table.following
        z, y = before.z[later], y0
        for _ in range(self.settings.pull_passes):
            y = y + self.project((z - y) / self.copies)
        return Iterate(z, y, before.l[later])

    def solve(
        self,
        measured: Measured,
        data: RowData | None = None,
        before: Iterate | None = None,
        *,
        may_continue: Callable[[int], bool] = lambda _: True,
        max_iterations: int | None = None,
    ) -> tuple[Plan, Iterate]:
        """Plan one period; always returns the best plan it has, however early it is told to stop.

        Args:
            measured: state, disturbances and last inputs.
            data: prices, targets and limits; the usual ones when left out.
            before: where the last period's solve ended; cold start when left out or when that one was not finite.
            may_continue: asked every `settings.chunk` passes with the passes run so far; False ends the solve.
            max_iterations: overrides the setting.

        Returns:
            The plan, and the iterate to hand to the next period.

        Raises:
            NotFiniteError: a measurement, price or target is not finite, or a limit is NaN.
            ForecastError: the disturbances are a forecast, and the design was built without.
        """
        data = self.data() if data is None else data
        require_finite(self.table, measured, data)
        if measured.w.ndim == 2 and not self.forecast:
            raise ForecastError("disturbances differ from step to step; build the design with forecast=True")
        y0 = self.free_response(measured)
        start = (
            Iterate(y0.copy(), y0, np.zeros_like(y0)) if before is None or not before.finite else self.warm(y0, before)
        )
        most = self.settings.max_iterations if max_iterations is None else max_iterations
        return self._run(start, data, may_continue, most)

    def _run(
        self, start: Iterate, data: RowData, may_continue: Callable[[int], bool], most: int
    ) -> tuple[Plan, Iterate]:
        settings, flat, scaled = self.settings, self.flat, self._weighted(data)
        z, y, l = start.z.copy(), start.y.copy(), start.l.copy()  # noqa: E741
        alpha, change = np.empty_like(y), np.zeros_like(y)
        done, outcome = 0, Outcome.OUT_OF_ITERATIONS
        looks: list[tuple[float, float]] = []
        while done < most:
            count = min(settings.chunk, most - done)
            kernels.iterate(
                count, 1.0 if done == 0 else settings.relax, settings.relax,
                z, y, l, alpha, change, self.copies, settings.rho / self.copies,
                scaled.price, scaled.target, scaled.soft_price, scaled.soft_lower, scaled.soft_upper,
                scaled.lower, scaled.upper,
                flat.touched, flat.at, flat.basis, flat.basis_at, flat.freedom,
            )  # fmt: skip
            done += count
            looks.append((self._worst(z - y), self._worst(change)))
            if all(residual <= settings.tolerance_spans for residual in looks[-1]):
                outcome = Outcome.CONVERGED
                break
            if not may_continue(done):
                outcome = Outcome.OUT_OF_TIME
                break
        return plan_of(self.table, z, y, change, data, done, outcome, looks), Iterate(z, y, l)

    def _weighted(self, data: RowData) -> RowData:
        """Scale row numbers from spans to weighted rows: f(z) is the same number in both."""
        root, weight = np.sqrt(self.table.weight), self.table.weight
        return RowData(
            price=data.price / weight,
            target=data.target * root,
            soft_price=data.soft_price / weight,
            soft_lower=data.soft_lower * root,
            soft_upper=data.soft_upper * root,
            lower=data.lower * root,
            upper=data.upper * root,
        )

    def _worst(self, weighted: Floats) -> float:
        return float(np.max(np.abs(weighted) / np.sqrt(self.table.weight)))
