"""Check 14: observer gains against a control library, and the filter against a statistics library on measured data.

Sources: `dlqe` of the Python Control Systems Library; the local-level model on the annual flow of the Nile at Aswan
1871-1970 (Durbin and Koopman, Time Series Analysis by State Space Methods, 2nd ed. 2012, section 2.2.2), the series and
the reference filter from statsmodels. The two variances, 15099 and 1469.1, were written down from memory; statsmodels'
own maximum-likelihood fit confirms them here before they are used.
"""

from typing import Any

import control
import numpy as np
import pytest
import statsmodels.api as sm
from scipy.linalg import solve_discrete_are

from controllers.arrays import Floats
from controllers.network import Network
from controllers.observer import Estimate, Noise, Observer
from tests.controllers.plants import row, tanks

IRREGULAR, LEVEL = 15099.0, 1469.1


@pytest.fixture(scope="module")
def nile() -> Floats:
    """Annual flows, 1e8 m3."""
    return np.asarray(sm.datasets.nile.load_pandas().data["volume"], dtype=float)


def local_level(nile: Floats) -> Any:
    """The reference model."""
    return sm.tsa.UnobservedComponents(nile, level="local level")


def level_observer() -> Observer:
    """The same model for the observer: one state that wanders, measured with noise."""
    network = Network.from_matrices([[1.0]], np.zeros((1, 0)), states={"nile": 1}, inputs={})
    return Observer.build(network, Noise(np.array([np.sqrt(IRREGULAR)]), np.array([np.sqrt(LEVEL)]), np.zeros(0)))


def test_the_variances_are_those_of_maximum_likelihood(nile: Floats) -> None:
    """statsmodels' own fit, started from nothing known (exact diffuse), finds them to the digits remembered."""
    model = sm.tsa.UnobservedComponents(nile, level="local level", use_exact_diffuse=True)
    fitted = model.fit(disp=False, pgtol=1e-10, factr=1.0)
    np.testing.assert_allclose(fitted.params, [IRREGULAR, LEVEL], rtol=1e-4)


def test_the_nile_is_filtered_like_the_reference(nile: Floats) -> None:
    """Once the exact filter's gain has settled, the steady-state observer gives the same level, year by year."""
    reference = local_level(nile).filter([IRREGULAR, LEVEL])
    observer = level_observer()
    estimate, levels, innovations = Estimate(nile[:1], np.zeros(0)), [], []
    for volume in nile:
        predicted = observer.predict(estimate, np.zeros(0), np.zeros(0))
        estimate, innovation = observer.correct(predicted, np.array([volume]), np.ones(1, dtype=bool))
        levels.append(estimate.x[0])
        innovations.append(innovation[0])
    settled = slice(50, None)
    np.testing.assert_allclose(levels[settled], reference.filtered_state[0, settled], rtol=1e-6)
    np.testing.assert_allclose(innovations[settled], reference.forecasts_error[0, settled], rtol=0, atol=1e-3)
    gain = reference.predicted_state_cov[0, 0, -1] / (reference.predicted_state_cov[0, 0, -1] + IRREGULAR)
    assert observer.gain_x.toarray()[0, 0] == pytest.approx(gain, rel=1e-6)


def test_the_gain_of_the_nile_has_a_closed_form() -> None:
    """With q the ratio of variances the steady gain is (s − q)/2 of s = sqrt(q² + 4 q), and the radius what is left."""
    q = LEVEL / IRREGULAR
    gain = (np.sqrt(q**2 + 4 * q) - q) / 2
    assert level_observer().gain_x.toarray()[0, 0] == pytest.approx(gain, rel=1e-9)
    assert level_observer().radius == pytest.approx(1 - gain, rel=1e-9)


def tank_model(seed: int) -> tuple[Observer, Floats, Floats, Floats, Floats]:
    """A lone tank's observer, and its model with the integrating disturbance: F, H, state and output covariance."""
    rng = np.random.default_rng(seed)
    network = tanks(row(1), rng)
    noise = Noise(rng.uniform(0.01, 0.1, 1), rng.uniform(0.001, 0.1, 2), rng.uniform(0.01, 1.0, 1))
    f = np.block([[network.a.toarray(), network.e.toarray()], [np.zeros((1, 2)), np.eye(1)]])
    h = np.hstack([network.c.toarray(), np.zeros((1, 1))])
    covariance = np.diag(np.concatenate([noise.state, noise.wander]) ** 2)
    return Observer.build(network, noise), f, h, covariance, np.diag(noise.output**2)


@pytest.mark.parametrize("seed", range(8))
def test_the_gain_agrees_with_a_control_library(seed: int) -> None:
    """`dlqe` gives the one-step predictor's gain L; the filter's gain K obeys L = F K, and K = P H' (H P H' + R)^-1."""
    observer, f, h, q, r = tank_model(seed)
    gain = np.vstack([observer.gain_x.toarray(), observer.gain_w.toarray()])
    library, covariance, poles = control.dlqe(f, np.eye(3), h, q, r)
    np.testing.assert_allclose(f @ gain, library, rtol=1e-6, atol=1e-9)
    np.testing.assert_allclose(gain, covariance @ h.T @ np.linalg.inv(h @ covariance @ h.T + r), rtol=1e-6, atol=1e-9)
    assert observer.radius == pytest.approx(np.abs(poles).max(), rel=1e-6)


@pytest.mark.parametrize("seed", range(8))
def test_the_riccati_equation_is_solved(seed: int) -> None:
    """Three thousand steps of the covariance recursion end where SciPy's equation solver does, and at the same gain."""
    observer, f, h, q, r = tank_model(seed)
    p = q
    for _ in range(3000):
        k = p @ h.T @ np.linalg.inv(h @ p @ h.T + r)
        p = f @ (p - k @ h @ p) @ f.T + q
    np.testing.assert_allclose(p, solve_discrete_are(f.T, h.T, q, r), rtol=1e-6, atol=1e-12)
    gain = np.vstack([observer.gain_x.toarray(), observer.gain_w.toarray()])
    np.testing.assert_allclose(p @ h.T @ np.linalg.inv(h @ p @ h.T + r), gain, rtol=1e-6, atol=1e-9)
