"""Curve of growth of Lyman alpha: its two limits, and a table.

The constants of both limits and the table are *derived* from f = 0.4164, gamma = 6.265e8 s^-1 and
1215.6701 Angstrom (Morton 2003, ApJS 149, 205, status: copy). Forms of the limits: Draine 2011,
Physics of the Interstellar and Intergalactic Medium, ch. 9 (status: memory).
"""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fogline.atomic import LYMAN_ALPHA, LYMAN_SERIES, equivalent_width

B = np.array([20.0, 24.0, 30.0, 36.0])
LOG_NHI = np.arange(13.0, 20.5)
# W [Angstrom], a column for each b [km/s]; exact Voigt profile, status: derived.
TABLE = np.array(
    [
        [0.0479, 0.0489, 0.0499, 0.0506],
        [0.2103, 0.2362, 0.2689, 0.2957],
        [0.3299, 0.3867, 0.4689, 0.5481],
        [0.4168, 0.4914, 0.6015, 0.7097],
        [0.5182, 0.6025, 0.7298, 0.8573],
        [0.8405, 0.9029, 1.0111, 1.1304],
        [2.328, 2.335, 2.354, 2.385],
        [7.322, 7.324, 7.328, 7.332],
    ]
)
DIGIT = np.array([1e-4] * 6 + [1e-3] * 2)


def test_table():
    # Tolerance: half the last digit.
    difference = np.abs(equivalent_width(LOG_NHI[:, None], B) - TABLE)
    assert np.all(difference <= 0.51 * DIGIT[:, None])


@pytest.mark.parametrize("line", LYMAN_SERIES, ids=lambda line: f"n={line.n}")
def test_thin_limit(line):
    # W/lambda = 8.853e-13 N f lambda[cm]; four digits, and at log N = 10 saturation takes
    # tau_0 / 2^1.5 = 1e-4 at b = 26 and Lyman alpha, less in all others.
    expected = line.wavelength * 8.853e-13 * 1e10 * line.f * line.wavelength * 1e-8
    assert_allclose(equivalent_width(10.0, 26.0, line), expected, rtol=2e-4)


@pytest.mark.parametrize("b", [10.0, 26.0])
def test_damped_limit(b):
    # W = 7.318 Angstrom (N/1e20)^1/2, four digits; the core's contribution falls as 1/N: it is
    # below 1e-4 from log N = 21 on for b <= 26.
    log_nhi = np.array([21.0, 22.0, 22.5])
    expected = 7.318 * 10.0 ** (0.5 * (log_nhi - 20.0))
    assert_allclose(equivalent_width(log_nhi, b), expected, rtol=2e-4)


def test_flat_part_grows_as_the_root_of_the_logarithm():
    # W ~ 2 lambda b/c sqrt(ln tau_0) between the limits: right to 10% (textbook approximation).
    tau_0 = 0.758 * 10.0 ** (16.0 - 13.0) * 10.0 / 26.0
    expected = 2.0 * LYMAN_ALPHA.wavelength * 26.0 / 299792.458 * np.sqrt(np.log(tau_0))
    assert equivalent_width(16.0, 26.0) == pytest.approx(expected, rel=0.1)
