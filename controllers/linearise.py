"""From any callable physics to the matrices of a network.

    dx/dt = f(x, u, w),   y = h(x)

1. `equilibrium` finds x, u with f = 0 and the chosen outputs at their targets, w given (Newton, sparse).
2. `jacobian` differentiates by complex steps, columns of sections that share no neighbour in one evaluation.
3. `discretise` holds inputs, disturbances and the neighbours' states over a step of Ts and is exact for every section
   by itself. The matrix exponential of the whole plant would couple everybody with everybody; `held_coupling_error`
   says what holding the couplings costs. It falls with the second power of Ts.

Complex-step derivative: Squire and Trapp, SIAM Review 40 (1998) 110-112: df/dx = Im f(x + i h) / h, without
cancellation. Exact discretisation by one exponential: Van Loan, IEEE TAC 23 (1978) 395-404.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import sparse
from scipy.linalg import expm
from scipy.sparse.linalg import expm_multiply, lsqr, splu

from controllers.arrays import Floats, Ints, block_diagonal
from controllers.exceptions import EquilibriumError

AnyArray = npt.NDArray[Any]
Physics = Callable[[AnyArray, AnyArray, AnyArray], AnyArray]
"""f(x, u, w) -> dx/dt on flat vectors, usable with complex x, u, w."""

COMPLEX_STEP = 1e-30


@dataclass(frozen=True)
class OperatingPoint:
    """Where the plant is linearised: f(x, u, w) = 0, flat vectors."""

    x: Floats
    u: Floats
    w: Floats


def jacobian(
    function: Callable[[AnyArray], AnyArray], at: Floats, colours: Ints, pattern: sparse.csr_array
) -> sparse.csr_array:
    """Differentiate `function` at `at`, exact to rounding.

    Args:
        function: vector (n,) to vector (k,), accepting complex input.
        at: point, (n,).
        colours: (n,) colour of every column; columns of one colour must have disjoint rows in `pattern`.
        pattern: (k, n) sparsity pattern that holds every entry that can be nonzero.
    """
    coo = pattern.tocoo()
    rows, columns = coo.coords
    data = np.zeros(len(rows))
    for colour in range(int(colours.max(initial=-1)) + 1):
        step = np.where(colours == colour, COMPLEX_STEP * 1j, 0.0)
        slope = np.imag(function(at + step)) / COMPLEX_STEP
        mine = colours[columns] == colour
        data[mine] = slope[rows[mine]]
    out = sparse.csr_array((data, (rows, columns)), shape=pattern.shape)
    out.eliminate_zeros()
    return out


def colour_columns(pattern: sparse.csr_array) -> Ints:
    """Greedy colouring: columns that share a row get different colours.

    Curtis, Powell and Reid, J. Inst. Maths Applics 13 (1974) 117-119.
    """
    ones = sparse.csr_array((np.ones(pattern.nnz), pattern.indices, pattern.indptr), shape=pattern.shape)
    conflicts = sparse.csr_array(ones.T @ ones)  # of the places, not the values: those may cancel
    colours = np.full(pattern.shape[1], -1, dtype=np.int64)
    for column in range(pattern.shape[1]):
        taken = {colours[j] for j in conflicts.indices[conflicts.indptr[column] : conflicts.indptr[column + 1]]}
        colour = 0
        while colour in taken:
            colour += 1
        colours[column] = colour
    return colours


def equilibrium(
    physics: Physics,
    outputs: Callable[[AnyArray], AnyArray],
    targets: Floats,
    guess: OperatingPoint,
    *,
    scale: Floats,
    pattern: sparse.csr_array | None = None,
    iterations: int = 50,
    tolerance: float = 1e-10,
) -> OperatingPoint:
    """Find the operating point that puts the outputs at their targets, by damped Newton steps of least norm.

    Args:
        physics: f.
        outputs: h, flat outputs (p,).
        targets: (p,), NaN where an output has no target.
        guess: where to start; its w is kept.
        scale: (n,) typical size of dx/dt of every state, so that residuals compare.
        pattern: (n + number of targets, n + m) where f and h depend on (x, u); everywhere when left out.

    Raises:
        EquilibriumError: it did not get there; the message says which equation is worst.
    """
    n, aimed = len(guess.x), np.flatnonzero(~np.isnan(targets))

    def residual(v: AnyArray) -> AnyArray:
        x, u = v[:n], v[n:]
        return np.concatenate([physics(x, u, guess.w) / scale, outputs(x)[aimed] - targets[aimed]])

    v = np.concatenate([guess.x, guess.u])
    if pattern is None:
        pattern = sparse.csr_array(np.ones((n + len(aimed), len(v))))
    colours = colour_columns(pattern)
    for _ in range(iterations):
        r = np.real(residual(v))
        if not np.isfinite(r).all():
            break
        worst = float(np.abs(r).max(initial=0.0))
        if worst < tolerance:
            return OperatingPoint(x=v[:n], u=v[n:], w=guess.w)
        slope = jacobian(residual, v, colours, pattern).tocsc()
        step = _newton_step(slope, r)
        if step is None:
            break
        length = 1.0
        while length > 1e-4 and not _improves(residual, v - length * step, worst):
            length /= 2
        if length <= 1e-4:  # no progress along the step: stay where the message means something
            break
        v = v - length * step
    r = np.real(residual(v))
    k = int(np.where(np.isfinite(r), np.abs(r), np.inf).argmax())
    equation = f"dx/dt[{k}] / scale" if k < n else f"output[{aimed[k - n]}] - target"
    raise EquilibriumError(
        f"no operating point found near the targets: {equation} is still {r[k]:.3g}; "
        "check the targets, the sizes and the guess"
    )


def _newton_step(slope: sparse.csc_array, r: Floats) -> Floats | None:
    """Solve `slope` step = r, by least norm when there are more unknowns; None where it is singular."""
    if slope.shape[0] != slope.shape[1]:
        return np.asarray(lsqr(slope, r, atol=1e-14, btol=1e-14)[0])
    try:
        return np.asarray(splu(slope).solve(r))
    except RuntimeError:  # how SuperLU reports an exactly singular matrix
        return None


def _improves(residual: Callable[[AnyArray], AnyArray], v: Floats, worst: float) -> bool:
    with np.errstate(all="ignore"):
        r = np.real(residual(v))
    return bool(np.isfinite(r).all() and np.abs(r).max(initial=0.0) < worst)


def discretise(
    a: sparse.csr_array, b: sparse.csr_array, e: sparse.csr_array, x_at: Ints, ts_s: float
) -> tuple[sparse.csr_array, sparse.csr_array, sparse.csr_array]:
    """Discretise continuous A, B, E with couplings held over the step; the sparsity by section is kept.

    Returns:
        A, B, E of (1) for a period of `ts_s` seconds.
    """
    blocks = [_exact_step(a[lo:hi, lo:hi].toarray(), ts_s) for lo, hi in pairwise(x_at)]
    own = block_diagonal([transition for transition, _ in blocks])
    integral = block_diagonal([held for _, held in blocks])
    diagonal = block_diagonal([a[lo:hi, lo:hi] for lo, hi in pairwise(x_at)])
    return (
        sparse.csr_array(own + integral @ (a - diagonal)),
        sparse.csr_array(integral @ b),
        sparse.csr_array(integral @ e),
    )


def _exact_step(a: Floats, ts_s: float) -> tuple[Floats, Floats]:
    """exp(a Ts) and the integral of exp(a t) over the step, from one exponential."""
    n = len(a)
    stacked = np.zeros((2 * n, 2 * n))
    stacked[:n, :n], stacked[:n, n:] = a * ts_s, np.eye(n) * ts_s
    big = expm(stacked)
    return big[:n, :n], big[:n, n:]


def held_coupling_error(
    a: sparse.csr_array, discrete: sparse.csr_array, ts_s: float, spans: Floats, *, samples: int = 16, seed: int = 0
) -> float:
    """One-step error of the held couplings against the exact exponential, as a fraction of span.

    Random states of the size of their spans are stepped both ways; the largest difference is returned.

    Args:
        a: continuous A, (n, n).
        discrete: A of (1) from `discretise`.
        ts_s: period.
        spans: (n,) size of every state.
    """
    x = np.random.default_rng(seed).uniform(-0.5, 0.5, (len(spans), samples)) * spans[:, None]
    exact = expm_multiply(sparse.csc_array(a) * ts_s, x)
    return float(np.max(np.abs(exact - discrete @ x) / spans[:, None]))
