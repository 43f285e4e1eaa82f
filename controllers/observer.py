"""A steady-state Kalman filter per section, on its local model with integrating disturbances.

Section i estimates its states x_i and its disturbances w_i, each a random walk, from its own outputs:

    x_i+ = A_ii x_i + B_ii u_i + E_ii (w_i + known_i) + what the neighbours' estimates of the same period bring in
    w_i+ = w_i,        y_i = C_ii x_i                                                                (6)

One integrating disturbance per measured output makes a loop with targets on those outputs settle without offset:
Pannocchia and Rawlings, AIChE J. 49 (2003) 426-437. The gain comes from the filter Riccati equation of section i alone;
couplings enter as known inputs. That the assembled observer is stable is therefore checked once, on the sparse error
dynamics of the whole plant, (I − K C) F, whose spectral radius must be below one.

    Estimate   x (n,), w (r,)    of the whole plant, deviations in the network's units
    Observer   K_x (n, p), K_w (r, p)  block-diagonal sparse gains
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import sparse
from scipy.linalg import LinAlgError, solve_discrete_are

from controllers.arrays import Bools, Floats, block_diagonal
from controllers.exceptions import ObserverError
from controllers.network import Network
from controllers.spectrum import spectral_radius


@dataclass(frozen=True)
class Noise:
    """Standard deviations per period: outputs (p,), states (n,), random walk of the disturbances (r,)."""

    output: Floats
    state: Floats
    wander: Floats


@dataclass(frozen=True)
class Estimate:
    """Estimated states (n,) and disturbances (r,) of the whole plant."""

    x: Floats
    w: Floats


@dataclass(frozen=True)
class Observer:
    """The gains, made once; the estimate is explicit and travels outside."""

    network: Network
    gain_x: sparse.csr_array
    gain_w: sparse.csr_array
    radius: float

    @classmethod
    def build(cls, network: Network, noise: Noise) -> Observer:
        """Solve the Riccati equation of every section and check the assembled error dynamics.

        Raises:
            ObserverError: a section has no stabilising gain, or the assembly is unstable.
        """
        seen: dict[bytes, Floats] = {}
        blocks_x, blocks_w = [], []
        for i in range(network.size):
            local = _Local.of(network, noise, i)
            key = local.key()
            if key not in seen:
                seen[key] = local.gain(network.names[i])
            n = local.a.shape[0]
            blocks_x.append(seen[key][:n])
            blocks_w.append(seen[key][n:])
        gain_x = block_diagonal(blocks_x)
        gain_w = block_diagonal(blocks_w)
        radius = spectral_radius(_error_dynamics(network, gain_x, gain_w))
        if not radius < 1:
            raise ObserverError(
                f"the assembled observer is unstable: spectral radius {radius:.6f}; "
                "strengthen the couplings' model or raise the assumed state noise"
            )
        return cls(network, gain_x, gain_w, radius)

    def predict(self, estimate: Estimate, u: Floats, known: Floats) -> Estimate:
        """Step (6) one period: `u` (m,) as written, `known` (r,) measured disturbances."""
        net = self.network
        return Estimate(net.a @ estimate.x + net.b @ u + net.e @ (estimate.w + known), estimate.w)

    def correct(self, predicted: Estimate, y: Floats, used: Bools) -> tuple[Estimate, Floats]:
        """Take in the outputs that may be used; the others coast on the prediction.

        Args:
            predicted: of this period.
            y: outputs, (p,); entries not used may be anything, NaN included.
            used: (p,) which outputs were admitted.

        Returns:
            The estimate, and the innovations (p,), zero where not used.
        """
        innovation = np.where(used, y - self.network.c @ predicted.x, 0.0)
        return Estimate(predicted.x + self.gain_x @ innovation, predicted.w + self.gain_w @ innovation), innovation


@dataclass(frozen=True)
class _Local:
    """One section's own matrices and noises."""

    a: Floats
    e: Floats
    c: Floats
    output: Floats
    state: Floats
    wander: Floats

    @classmethod
    def of(cls, net: Network, noise: Noise, i: int) -> _Local:
        x, w, y = (slice(int(at[i]), int(at[i + 1])) for at in (net.x_at, net.w_at, net.y_at))
        return cls(
            a=net.a[x, x].toarray(),
            e=net.e[x, w].toarray(),
            c=net.c[y, x].toarray(),
            output=noise.output[y],
            state=noise.state[x],
            wander=noise.wander[w],
        )

    def key(self) -> bytes:
        parts = (self.a, self.e, self.c, self.output, self.state, self.wander)
        return repr([part.shape for part in parts]).encode() + b"".join(
            np.ascontiguousarray(part).tobytes() for part in parts
        )

    def gain(self, name: str) -> Floats:
        """Filter gain of (x_i, w_i), (n_i + r_i, p_i)."""
        n, r, p = self.a.shape[0], self.e.shape[1], self.c.shape[0]
        if p == 0:
            if r:
                raise ObserverError(
                    f"section {name!r} has {r} disturbance(s) to estimate but measures nothing; "
                    "measure an output or drop them"
                )
            return np.zeros((n, 0))
        f = np.block([[self.a, self.e], [np.zeros((r, n)), np.eye(r)]])
        h = np.hstack([self.c, np.zeros((p, r))])
        q = np.diag(np.concatenate([self.state, self.wander]) ** 2)
        try:
            covariance = solve_discrete_are(f.T, h.T, q, np.diag(self.output**2))
        except (LinAlgError, ValueError) as error:
            raise ObserverError(
                f"section {name!r} has no steady-state filter ({error}); "
                "its outputs do not show its states and disturbances"
            ) from error
        return np.asarray(covariance @ h.T @ np.linalg.inv(h @ covariance @ h.T + np.diag(self.output**2)))


def _error_dynamics(net: Network, gain_x: sparse.csr_array, gain_w: sparse.csr_array) -> sparse.csr_array:
    """(I − K C) F of the whole plant, states first, then disturbances."""
    r = net.e.shape[1]
    f = sparse.block_array([[net.a, net.e], [None, sparse.eye_array(r)]], format="csr") if r else net.a
    gain = sparse.vstack([gain_x, gain_w], format="csr")
    seen = net.c @ f[: net.a.shape[0]]
    return sparse.csr_array(f - gain @ seen)


def seed(network: Network, y: Floats, u: Floats) -> Floats:
    """States that explain outputs y (p,) and inputs u (m,) at rest, deviations, (n,).

    States that an output shows take its value (least squares); the others are where those and the inputs hold them.
    """
    x = np.zeros(network.a.shape[0])
    for i in range(network.size):
        own, into, out = (slice(int(at[i]), int(at[i + 1])) for at in (network.x_at, network.u_at, network.y_at))
        c = network.c[out, own].toarray()
        shown = np.abs(c).max(axis=0, initial=0.0) > 0
        x_own = np.zeros(c.shape[1])
        if shown.any():
            x_own[shown] = np.linalg.lstsq(c[:, shown], y[out])[0]
        hidden = np.flatnonzero(~shown)
        if len(hidden):
            a = network.a[own, own].toarray()
            b = network.b[own, into].toarray()
            push = a[np.ix_(hidden, shown)] @ x_own[shown] + b[hidden] @ u[into]
            x_own[hidden] = np.linalg.lstsq(np.eye(len(hidden)) - a[np.ix_(hidden, hidden)], push)[0]
        x[own] = x_own
    return x
