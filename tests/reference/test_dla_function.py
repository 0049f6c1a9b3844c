"""The Γ-function of the DLAs of one survey, through incidence and H I density.

Noterdaeme, Petitjean, Ledoux & Srianand 2009: f = k (N/N_g)^α exp(-N/N_g) with log k = -22.75,
log N_g = 21.26, α = -1.27 (status: memory). Its integrals from log N = 20.3 are Ω_gas = 1.045e-3
with a helium factor of 1.3 and H0 = 70, and ℓ(X) = 0.076 (status: derived).
"""

import numpy as np
import pytest
from scipy.special import gamma, gammaincc

from fogline.cosmology import Cosmology
from fogline.datasets import hypothetical
from fogline.distribution import ColumnDistribution
from fogline.quantities import Setting
from fogline.quantities.hi_density import mass_per_moment
from fogline.response import build_response

LOG_K, LOG_NG, ALPHA = -22.75, 21.26, -1.27
PIVOTS = tuple(float(p) for p in np.linspace(20.3, 23.0, 109))
SETTING = Setting(
    ColumnDistribution(2.5, PIVOTS, (20.3,)), Cosmology(70.0, 0.3), {"dist": "fixed", "b": 26.0}
)


def log_f(log_nhi):
    relative = np.asarray(log_nhi) - LOG_NG
    return LOG_K + ALPHA * relative - 10.0**relative / np.log(10.0)


def predict(quantity, **meta):
    data = hypothetical(quantity, [2.5], log_nhi_min=20.3, **meta)
    return build_response([data], SETTING).predict(np.array([*log_f(PIVOTS), 0.0]))[0]


def test_incidence():
    # 0.076 is given to two digits.
    assert predict("lls_incidence", per="dX") == pytest.approx(0.076, abs=0.0005)


def test_gas_density():
    found = predict("hi_density", form="omega_gas", helium_factor=1.3)
    assert found == pytest.approx(1.045e-3, abs=0.001e-3)
    # The control: another author's helium factor is off by far more than the last digit.
    assert abs(found / 1.3 / 0.76 - 1.045e-3) > 0.01e-3


def test_mass_is_an_incomplete_gamma_function():
    # ∫ N f dN from N_0 = k N_g^2 Γ(α + 2, N_0/N_g); the pivots end where exp(-N/N_g) is 1e-24.
    x = 10.0 ** (20.3 - LOG_NG)
    moment = 10.0 ** (LOG_K + 2.0 * LOG_NG) * gamma(ALPHA + 2.0) * gammaincc(ALPHA + 2.0, x)
    expected = moment * mass_per_moment(SETTING.cosmology)
    found = predict("hi_density", form="rho_hi", unit="Msun / Mpc3")
    # The spline follows the exponential between its pivots to 1e-5.
    assert found == pytest.approx(expected, rel=3e-5)
