"""Equivalent widths against adaptive and arbitrary-precision quadrature; cross-section limits."""

from itertools import pairwise

import mpmath
import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import integrate, special

from fogline import constants
from fogline.atomic import (
    LYMAN_ALPHA,
    LYMAN_SERIES,
    SIGMA_912,
    equivalent_width,
    log_nhi_at_tau,
    photoionization_cross_section,
)


def line_depth_and_damping(log_nhi, b, line):
    """Central depth of the Gaussian core and damping parameter, written out afresh."""
    wavelength, b_cgs = line.wavelength * 1e-8, b * 1e5
    depth = 10.0**log_nhi * constants.LINE_AREA * line.f * wavelength / (np.pi**0.5 * b_cgs)
    return depth, line.gamma * wavelength / (4.0 * np.pi * b_cgs)


def width_by_quad(log_nhi, b, line):
    depth, damping = line_depth_and_damping(log_nhi, b, line)

    def absorbed(x):
        return -np.expm1(-depth * special.wofz(x + 1j * damping).real)

    def absorbed_per_ln(ln_x):
        return np.exp(ln_x) * absorbed(np.exp(ln_x))

    edge = np.sqrt(np.log(max(depth, 2.0)))
    wing = np.sqrt(depth * damping)
    core = [0.0, edge / 2.0, edge, edge + 1.0, edge + 3.0, 12.0]
    far = np.log([12.0, *(x for x in (wing / 10, wing, wing * 10) if x > 12.0), 1e9])
    pieces = [
        *integrate_pieces(absorbed, core, 1e-12),
        *integrate_pieces(absorbed_per_ln, far, 1e-11),
        depth * damping / np.sqrt(np.pi) / 1e9,  # the optically thin wing beyond x = 1e9
    ]
    return 2.0 * line.wavelength * b * 1e5 / constants.C_CGS * sum(pieces)


def integrate_pieces(function, edges, epsrel):
    for low, high in pairwise(edges):
        # The core's edge may lie within the far part: quad then splits by itself.
        yield integrate.quad(function, low, high, epsabs=1e-300, epsrel=epsrel, limit=400)[0]


@pytest.mark.parametrize("line", [LYMAN_ALPHA, LYMAN_SERIES[5], LYMAN_SERIES[-1]])
@pytest.mark.parametrize("b", [5.0, 26.0, 150.0])
def test_equivalent_width_agrees_with_adaptive_quadrature(b, line):
    log_nhi = np.arange(10.0, 23.1, 0.5)
    expected = [width_by_quad(one, b, line) for one in log_nhi]
    assert_allclose(equivalent_width(log_nhi, b, line), expected, rtol=1e-6)


def width_by_mpmath(log_nhi, b, line):
    """30 digits, with H(a, x) from the complementary error function of a complex argument."""
    with mpmath.workdps(30):
        depth, damping = (mpmath.mpf(float(v)) for v in line_depth_and_damping(log_nhi, b, line))

        def absorbed(x):
            z = mpmath.mpc(x, damping)
            return -mpmath.expm1(-depth * (mpmath.exp(-z * z) * mpmath.erfc(-1j * z)).real)

        # erfc loses digits beyond the core, where the continued asymptotic series is exact.
        def wing(x):
            z2 = mpmath.mpc(x, damping) ** 2
            series = 1 + 1 / (2 * z2) + 3 / (4 * z2**2) + 15 / (8 * z2**3) + 105 / (16 * z2**4)
            return -mpmath.expm1(
                -depth * (1j * series / (mpmath.sqrt(mpmath.pi) * mpmath.sqrt(z2))).real
            )

        core = mpmath.quad(absorbed, [0, 1, 2, 3, 4, 5, 6])
        mid = mpmath.quad(wing, [20, 100, 1000])
        near = mpmath.quad(absorbed, [6, 10, 20])
        far = mpmath.quad(lambda u: wing(1 / u) / u**2, [mpmath.mpf(10) ** -14, 1e-6, 1e-4, 1e-3])
        return float(2 * line.wavelength * b * 1e5 / constants.C_CGS * (core + near + mid + far))


@pytest.mark.parametrize(("log_nhi", "b"), [(13.0, 20.0), (17.5, 26.0), (20.3, 40.0)])
def test_equivalent_width_agrees_with_arbitrary_precision(log_nhi, b):
    expected = width_by_mpmath(log_nhi, b, LYMAN_ALPHA)
    assert_allclose(equivalent_width(log_nhi, b), expected, rtol=1e-7)


def test_equivalent_width_broadcasts_and_grows_with_column():
    log_nhi, b = np.linspace(10.0, 23.0, 66), np.array([5.0, 26.0, 150.0])
    table = equivalent_width(log_nhi[:, None], b)
    assert table.shape == (66, 3)
    assert np.all(np.diff(table, axis=0) > 0.0)
    assert_allclose(table[:, 1], equivalent_width(log_nhi, 26.0), rtol=1e-13)
    assert equivalent_width(14.0, 26.0).shape == ()


def test_thin_line_does_not_depend_on_doppler_parameter():
    # tau_0 = 1.5e-4 at b = 5, log N = 9: saturation takes tau_0 / 2^1.5 = 5.4e-5 of W.
    widths = equivalent_width(9.0, np.array([5.0, 150.0]))
    assert_allclose(widths[0], widths[1], rtol=6e-5)


def test_cross_section_is_smooth_at_threshold():
    # The closed form expanded in eps^2 = nu/nu_912 - 1: sigma = SIGMA_912 (1 - 8/3 eps^2 + ...).
    step = np.array([1e-13, 1e-11, 1e-9, 1e-7])
    loss = 1.0 - photoionization_cross_section(1.0 + step) / SIGMA_912
    assert_allclose(loss, 8.0 / 3.0 * step, rtol=1e-6, atol=2e-15)
    assert photoionization_cross_section(1.0) == SIGMA_912
    just_above = photoionization_cross_section(np.nextafter(1.0, 2.0))
    assert_allclose(just_above, SIGMA_912, rtol=2e-15)


def test_cross_section_agrees_with_arbitrary_precision():
    ratios = [1.0 + 1e-10, 1.0 + 1e-4, 1.02, 1.5, 3.0, 100.0]
    with mpmath.workdps(40):
        expected = []
        for ratio in map(mpmath.mpf, ratios):
            eps = mpmath.sqrt(ratio - 1)
            shape = mpmath.exp(4 - 4 * mpmath.atan(eps) / eps) / (
                1 - mpmath.exp(-2 * mpmath.pi / eps)
            )
            expected.append(float(SIGMA_912 * shape / ratio**4))
    assert_allclose(photoionization_cross_section(ratios), expected, rtol=5e-15)


def test_cross_section_vanishes_below_threshold():
    assert_allclose(photoionization_cross_section([0.0, 0.5, np.nextafter(1.0, 0.0)]), 0.0, atol=0)


def test_cross_section_falls_more_slowly_than_the_cube():
    # nu^-3 is 15% low at 2 Ryd.
    assert SIGMA_912 / 8.0 / photoionization_cross_section(2.0) == pytest.approx(0.846, abs=1e-3)


def test_column_at_optical_depth_gives_that_depth_back():
    tau = np.array([0.5, 1.0, 2.0, 1000.0])
    assert_allclose(10.0 ** log_nhi_at_tau(tau) * SIGMA_912, tau, rtol=1e-13)
    # Common practice: log N = 17.2 for tau = 1, 17.5 for tau = 2.
    assert_allclose(log_nhi_at_tau([1.0, 2.0]), [17.20, 17.50], atol=5e-3)
