"""Terminal prices: what the steps after the horizon will cost, so that a short horizon plans like an endless one.

Section i by itself, couplings left out, has state xi = (x_i, u_i(−1)), the second part because moves may be priced:

    xi+ = [A_ii 0; 0 0] xi + [B_ii; I] u        row k of quantity r:  C_r xi_k + D_r u_k

Without limits, all rows from step T on cost xi_T' P_i xi_T, with P_i the stabilising solution of the discrete algebraic
Riccati equation of (A, B, C'qC, D'qD, C'qD). (Rows hold states at t = k + 1, so the row of x_T itself is not in P_i: it
is priced already.) A factor P_i = F'F makes that a few quantities, mixes of states and inputs, each priced 1 per span
squared at the last step only: their values are square roots of cost. Terminal cost from the Riccati equation:
Chmielewski and Manousiouthakis, Systems & Control Letters 29 (1996) 121-129; exact for a section nobody is coupled to.

Where targets are not zero or disturbances persist, they count from where the plant will rest: `controllers.rest`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from scipy.linalg import LinAlgError, eigh, solve_discrete_are, solve_discrete_lyapunov

from controllers.arrays import Floats
from controllers.exceptions import TerminalPriceError
from controllers.network import Network
from controllers.quantities import Of, Quantity, Term

RANK_TOLERANCE = 1e-12


def terminal_quantities(
    network: Network,
    quantities: Sequence[Quantity],
    horizon: int,
    *,
    override: Mapping[str, Floats | None] | None = None,
    weight: float = 1.0,
) -> tuple[Quantity, ...]:
    """Return the quantities to add, named `<section>.terminal-1` and so on, priced at the last step only.

    Args:
        network: the plant.
        quantities: what is priced; a price sequence goes on with its last price. Those that several sections share
            are left out: they are not local.
        horizon: T.
        override: P of a section, (n_i, n_i) over its states or (n_i + m_i,) squared over states and last inputs;
            None prices nothing.
        weight: of their rows in the norm of the split.

    Raises:
        TerminalPriceError: a section has no stabilising solution, or an override does not fit.
        NetworkError: an override names no section.
    """
    given = {} if override is None else dict(override)
    for name in given:
        network.index(name)
    own: dict[str, list[Quantity]] = {name: [] for name in network.names}
    for quantity in quantities:
        if all(term.section == quantity.section for term in quantity.terms):
            own[quantity.section].append(quantity)
    seen: dict[bytes, Floats] = {}
    out = []
    for i, name in enumerate(network.names):
        p = _overridden(network, i, given[name]) if name in given else _riccati(network, i, own[name], seen)
        price = (0.0,) * (horizon - 1) + (1.0,)
        for k, mix in enumerate(_factor(p)):
            x, u = mix[: network.x_at[i + 1] - network.x_at[i]], mix[network.x_at[i + 1] - network.x_at[i] :]
            terms = [Term(name, of, tuple(part.tolist())) for of, part in ((Of.STATE, x), (Of.INPUT, u)) if part.any()]
            first = terms[0]
            out.append(
                Quantity(
                    f"{name}.terminal-{k + 1}", name, first.of, first.mix, 1.0, weight, price, plus=tuple(terms[1:])
                )
            )
    return tuple(out)


def _riccati(network: Network, i: int, quantities: Sequence[Quantity], seen: dict[bytes, Floats]) -> Floats:
    """P_i over (x_i, u_i(−1)), solved once for sections that are alike."""
    a, b, c = _own(network, i)
    n, m = b.shape
    stages = [_stage(quantity, a, b, c) for quantity in quantities if np.atleast_1d(quantity.price)[-1] > 0]
    if not stages:
        return np.zeros((n + m, n + m))
    on_state, on_input = (np.array(parts) for parts in zip(*stages, strict=True))
    key = repr((n, m, len(stages))).encode() + b"".join(part.tobytes() for part in (a, b, on_state, on_input))
    if key not in seen:
        seen[key] = _solved(network.names[i], a, b, on_state, on_input)
    return seen[key]


def _solved(name: str, a: Floats, b: Floats, on_state: Floats, on_input: Floats) -> Floats:
    """P of one section from its matrices and the rows C, D of its prices."""
    n, m = b.shape
    wide_a = np.zeros((n + m, n + m))
    wide_a[:n, :n] = a
    q, r, s = on_state.T @ on_state, on_input.T @ on_input, on_state.T @ on_input
    try:
        if m == 0:
            if np.abs(np.linalg.eigvals(a)).max() >= 1:
                raise LinAlgError("it is not stable and has no input")
            p = solve_discrete_lyapunov(wide_a.T, q)
        else:
            p = solve_discrete_are(wide_a, np.vstack([b, np.eye(m)]), q, r, s=s)
    except (LinAlgError, ValueError) as error:
        raise TerminalPriceError(
            f"section {name!r} has no terminal price of its own ({error}); "
            "price what its inputs and unstable states do, or override it with a matrix, or with None for no price"
        ) from error
    return np.asarray(p + p.T) / 2


def _own(network: Network, i: int) -> tuple[Floats, Floats, Floats]:
    """A_ii, B_ii, C_ii."""
    x, u, y = (slice(int(at[i]), int(at[i + 1])) for at in (network.x_at, network.u_at, network.y_at))
    return network.a[x, x].toarray(), network.b[x, u].toarray(), network.c[y, x].toarray()


def _stage(quantity: Quantity, a: Floats, b: Floats, c: Floats) -> tuple[Floats, Floats]:
    """C_r over (x, u_before) and D_r over u, in square roots of cost."""
    n, m = b.shape
    on_state, on_input, on_before = np.zeros(n), np.zeros(m), np.zeros(m)
    for term in quantity.terms:
        mix = np.asarray(term.mix, dtype=float)
        if term.of.ahead:
            ahead = mix if term.of is Of.STATE else mix @ c
            on_state, on_input = on_state + ahead @ a, on_input + ahead @ b
        else:
            on_input = on_input + mix
            on_before = on_before - mix if term.of is Of.MOVE else on_before
    root = np.sqrt(np.atleast_1d(quantity.price)[-1]) / quantity.span
    return root * np.concatenate([on_state, on_before]), root * on_input


def _overridden(network: Network, i: int, p: Floats | None) -> Floats:
    """P_i as given, checked and widened to (x_i, u_i(−1))."""
    n, m = int(network.x_at[i + 1] - network.x_at[i]), int(network.u_at[i + 1] - network.u_at[i])
    wide = np.zeros((n + m, n + m))
    if p is None:
        return wide
    section = f"terminal price of section {network.names[i]!r}"
    if p.shape not in ((n, n), (n + m, n + m)):
        raise TerminalPriceError(
            f"{section} has shape {p.shape}; give ({n}, {n}) over its states or ({n + m}, {n + m}) over states and "
            "last inputs"
        )
    if not np.isfinite(p).all() or not np.allclose(p, p.T, rtol=1e-9, atol=1e-12 * np.abs(p).max(initial=0.0)):
        raise TerminalPriceError(f"{section} is not a finite symmetric matrix; give one")
    least = float(np.linalg.eigvalsh(p)[0])
    if least < -1e-9 * np.abs(p).max(initial=0.0):
        raise TerminalPriceError(f"{section} has the eigenvalue {least:.3g}; prices must not be negative")
    wide[: len(p), : len(p)] = p
    return wide


def _factor(p: Floats) -> Floats:
    """F (k, n) with P = F'F, from the eigenvalues of P scaled to a unit diagonal: units do not matter to its rank."""
    root = np.sqrt(np.maximum(np.diag(p), 0.0))
    inverse = np.divide(1.0, root, out=np.zeros_like(root), where=root > 0)
    values, vectors = eigh(inverse[:, None] * p * inverse)
    kept = values > RANK_TOLERANCE * max(float(values[-1]), 1e-300)
    return np.asarray(np.sqrt(values[kept])[:, None] * vectors[:, kept].T * root)[::-1]
