"""Where the whole plant will rest: what terminal prices (`controllers.terminal`) are counted from.

For targets that are not zero and disturbances w that persist, the plant ends at the point (x, u) of

    minimise  rows' prices at rest   subject to   (I − A) x − B u = E w

and, where resting there still costs something, one more unit of state costs −A'mu besides, mu the multipliers.
Terminal quantities F xi are aimed at F xi_rest − d, with F'd half that cost: P is then centred where an endless horizon
would be.
The conditions are linear in targets and disturbances: factorised once, one sparse back-substitution per call.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy import sparse
from scipy.sparse.linalg import SuperLU, splu

from controllers.arrays import Floats
from controllers.exceptions import TerminalPriceError
from controllers.quantities import Of, Quantity
from controllers.rows import RowData, RowTable

SLIGHT_PULL = 1e-10
"""Of the largest price: picks the nearest of several resting points when an input is free to rest anywhere."""


@dataclass(frozen=True)
class Rest:
    """Where the whole plant will rest, factorised once for the usual prices of a table; see the head of this file."""

    table: RowTable
    terminal: tuple[Quantity, ...]
    on_x: sparse.csr_array
    on_u: sparse.csr_array
    price: Floats
    factor: SuperLU

    @classmethod
    def build(cls, table: RowTable, terminal: Sequence[Quantity]) -> Rest:
        """Factorise; `terminal` are those quantities of the table that `terminal_quantities` made.

        Raises:
            TerminalPriceError: the plant has no resting point.
        """
        net, steps, last = table.network, table.horizon, slice(table.horizon - 1, None, table.horizon)
        n, m = net.a.shape[0], net.b.shape[1]
        qx, qu, _ = table.maps
        on_x = sparse.csr_array(qx[last] @ sparse.kron(np.ones((steps, 1)), sparse.eye_array(n)))
        on_u = sparse.csr_array(qu[last] @ sparse.kron(np.ones((steps, 1)), sparse.eye_array(m)))
        names = {quantity.name for quantity in terminal}
        price = np.where([q.name in names for q in table.quantities], 0.0, table.data().price[last])
        shown = sparse.hstack([on_x, on_u], format="csr")
        priced = sparse.csr_array(shown.T @ sparse.diags_array(price) @ shown)
        pull = SLIGHT_PULL * max(float(priced.diagonal().max(initial=0.0)), 1e-300)
        rest = sparse.hstack([sparse.eye_array(n) - net.a, -net.b], format="csr")
        kkt = sparse.block_array([[priced + pull * sparse.eye_array(n + m), rest.T], [rest, None]], format="csc")
        try:
            factor = splu(kkt)
        except RuntimeError as error:  # how SuperLU reports an exactly singular matrix
            raise TerminalPriceError(
                f"the plant has no resting point ({error}); a state that integrates needs an input that stops it"
            ) from error
        return cls(table, tuple(terminal), on_x, on_u, price, factor)

    def point(self, data: RowData, w: Floats) -> tuple[Floats, Floats, Floats]:
        """Return x (n,), u (m,) at rest for these targets and disturbances (r,), and the cost of state −A'mu (n,)."""
        net = self.table.network
        n, m = net.a.shape[0], net.b.shape[1]
        aimed = self.price * data.target[self.table.horizon - 1 :: self.table.horizon]
        v = self.factor.solve(np.concatenate([self.on_x.T @ aimed, self.on_u.T @ aimed, net.e @ w]))
        return v[:n], v[n : n + m], -(net.a.T @ v[n + m :])

    def aim(self, data: RowData, w: Floats) -> RowData:
        """Return `data` with the terminal quantities' targets at the resting point; everything else as it was.

        Args:
            data: row numbers of the period.
            w: disturbances (r,), or a forecast (T, r), whose last step persists.
        """
        net = self.table.network
        x, u, slope = self.point(data, w[-1] if w.ndim == 2 else w)
        targets: dict[str, float] = {}
        by_section: dict[str, list[Quantity]] = {}
        for quantity in self.terminal:
            by_section.setdefault(quantity.section, []).append(quantity)
        for name, quantities in by_section.items():
            i = net.index(name)
            xs, us = slice(int(net.x_at[i]), int(net.x_at[i + 1])), slice(int(net.u_at[i]), int(net.u_at[i + 1]))
            on_x = np.zeros((len(quantities), xs.stop - xs.start))
            on_u = np.zeros((len(quantities), us.stop - us.start))
            for k, quantity in enumerate(quantities):
                for term in quantity.terms:
                    (on_x if term.of is Of.STATE else on_u)[k] = term.mix
            tilt = np.linalg.lstsq(np.hstack([on_x, on_u]).T, np.concatenate([slope[xs], np.zeros(on_u.shape[1])]))[0]
            for quantity, value in zip(quantities, on_x @ x[xs] + on_u @ u[us] - tilt, strict=True):
                targets[quantity.name] = float(value)
        return self.table.retarget(data, targets)
