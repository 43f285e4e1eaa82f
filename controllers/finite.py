"""Numbers are checked before a solve: nothing that is not finite gets in, and the message says where it came from."""

from __future__ import annotations

import numpy as np

from controllers.exceptions import NotFiniteError
from controllers.plans import Measured
from controllers.rows import RowData, RowTable


def require_finite(table: RowTable, measured: Measured, data: RowData) -> None:
    """Check shapes and numbers of one period.

    Raises:
        NotFiniteError: names the section or the quantity, what is wrong with it and what to do instead.
    """
    net = table.network
    for what, values, at in (
        ("state", measured.x, net.x_at),
        ("disturbance", measured.w, net.w_at),
        ("last input", measured.u_before, net.u_at),
    ):
        ahead = (table.horizon, int(at[-1]))
        if values.shape != (at[-1],) and not (what == "disturbance" and values.shape == ahead):
            also = f" or {ahead}" if what == "disturbance" else ""
            raise NotFiniteError(f"{what}s have shape {values.shape}; the network wants ({at[-1]},){also}")
        places = np.argwhere(~np.isfinite(values))
        if len(places):
            section = net.names[int(np.searchsorted(at, places[0][-1], side="right") - 1)]
            raise NotFiniteError(
                f"{what} of section {section!r} is {values[tuple(places[0])]}; "
                "hold the section or coast its estimate instead"
            )
    for what, numbers, wrong in (
        ("price", data.price, ~np.isfinite(data.price)),
        ("target", data.target, ~np.isfinite(data.target)),
        ("soft price", data.soft_price, ~np.isfinite(data.soft_price)),
        ("lower end of the soft band", data.soft_lower, np.isnan(data.soft_lower)),
        ("upper end of the soft band", data.soft_upper, np.isnan(data.soft_upper)),
        ("lower hard limit", data.lower, np.isnan(data.lower)),
        ("upper hard limit", data.upper, np.isnan(data.upper)),
    ):
        bad = np.flatnonzero(wrong)
        if len(bad):
            quantity = table.quantities[int(bad[0]) // table.horizon]
            raise NotFiniteError(f"{what} of quantity {quantity.name!r} is {numbers[bad[0]]}; give a number")
