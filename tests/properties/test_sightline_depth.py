"""Lines and continuum along sightlines, and the quantities made of them, against quadrature.

Definitions are written out again in `reference_integrals` and here, with scipy's quadrature.
Equivalent widths of higher lines are fogline's own (tested against arbitrary precision elsewhere).
"""

import dataclasses

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import special
from scipy.integrate import quad
from test_accuracy import DOPPLER, FEWER, RTOL, rows, setting_of, truths

from fogline import constants
from fogline.atomic import (
    LYMAN_LIMIT,
    LYMAN_SERIES,
    equivalent_width,
    lyman_series,
    photoionization_cross_section,
)
from fogline.datasets import hypothetical
from fogline.quadrature import column_nodes
from fogline.response import build_response, raw_predictions
from fogline.sightline_depth import depth_block
from reference_integrals import Truth, background, cross_section, dx_dz

LINES = lyman_series(6)
PLAIN = Truth(
    2.5,
    (12.0, 13.5, 15.0, 16.2, 17.5, 19.0, 20.3, 21.0, 21.6, 22.5),
    (-9.7, -11.65, -14.3, -16.5, -18.5, -20.15, -21.6, -22.6, -23.75, -26.5),
    (14.0, 17.5, 20.3),
    (1.9, 2.0, 0.6),
    background(70.0, 0.3),
)

WAVELENGTHS = np.array([700.0, 1500.0, 2600.0, 3900.0, 4050.0, 4400.0, 5300.0, 5600.0])


def width_of(line):
    return lambda log_nhi: equivalent_width(log_nhi, DOPPLER, line)


def tau_lines(truth, wavelength, z_em, lines=LINES, columns=(12.0, 22.5)):
    total = 0.0
    for line in lines:
        z = wavelength / line.wavelength - 1.0
        if not 0.0 <= z < z_em:
            continue
        moment = truth.dense.integral(
            *columns, z, lambda n, j=line: equivalent_width(n, DOPPLER, j)
        )
        total += (1.0 + z) / line.wavelength * dx_dz(truth.cosmology, z) * moment
    return total


def tau_continuum(truth, wavelength, z_em, columns=(12.0, 22.5)):
    z_912 = wavelength / LYMAN_LIMIT - 1.0
    if z_912 >= z_em:
        return 0.0

    def integrand(z):
        sigma = cross_section((1.0 + z) / (1.0 + z_912))
        absorbed = truth.dense.integral(*columns, z, lambda n: -np.expm1(-(10.0**n) * sigma))
        return dx_dz(truth.cosmology, z) * absorbed

    return quad(integrand, max(z_912, 0.0), z_em, epsabs=1e-11, epsrel=1e-8, limit=200)[0]


@FEWER
@given(truths(), st.sampled_from([2.3, 3.5]))
def test_depth_of_lines_and_continuum(truth, z_em):
    setting = setting_of(truth)
    block = depth_block([(z_em, WAVELENGTHS)], setting, lines=LINES)
    raw = raw_predictions(setting, block, truth.theta[None])[0]
    expected = [tau_lines(truth, w, z_em) + tau_continuum(truth, w, z_em) for w in WAVELENGTHS]
    assert_allclose(raw, expected, rtol=RTOL)


@FEWER
@given(truths())
def test_depth_of_a_range_of_columns_and_of_several_sources(truth):
    setting = setting_of(truth)
    columns = (14.3, 19.7)
    sources = [(2.6, np.array([2000.0, 3600.0])), (4.1, np.array([4300.0]))]
    block = depth_block(sources, setting, lines=LINES, columns=columns)
    raw = raw_predictions(setting, block, truth.theta[None])[0]
    expected = [
        tau_lines(truth, w, z, columns=columns) + tau_continuum(truth, w, z, columns)
        for z, wavelengths in sources
        for w in wavelengths
    ]
    assert_allclose(raw, expected, rtol=RTOL)


def test_whole_series_takes_every_absorber_as_one_profile():
    """All lines and the continuum in one profile σ(λ) an absorber, no line taken alone.

    τ(λ) = ∫ dz (dX/dz) ∫ f {1 - exp[-N σ(λ / (1+z))]} dN, on steps of a fifth of a Doppler width.
    """
    z_em, setting = 3.4, setting_of(PLAIN)
    rest = np.array([905.0, 916.5])
    block = depth_block([(z_em, (1.0 + z_em) * rest)], setting)
    found = raw_predictions(setting, block, PLAIN.theta[None])[0]
    log_nhi, d_nhi = column_nodes(12.0, 22.5, setting.distribution.kinks)
    width = DOPPLER / 299792.458
    expected = []
    for wavelength in rest * (1.0 + z_em):
        ln_rest = np.arange(np.log(wavelength / (1.0 + z_em)), np.log(1250.0), 0.2 * width)
        z = wavelength / np.exp(ln_rest) - 1.0
        sigma = whole_profile(ln_rest, DOPPLER)
        near = np.flatnonzero(sigma > 1e-26)
        f = 10.0 ** setting.distribution.log_f(
            PLAIN.theta, np.tile(log_nhi, len(near)), np.repeat(z[near], len(log_nhi))
        ).reshape(len(near), -1)
        absorbed = -np.expm1(-sigma[near, None] * 10.0**log_nhi)
        along = (1.0 + z[near]) * dx_dz(PLAIN.cosmology, z[near])
        expected.append(np.trapezoid(along * ((f * absorbed) @ d_nhi), ln_rest[near]))
    # Lines up to n = 12 are taken as not overlapping and symmetric in λ.
    assert_allclose(found, expected, rtol=2e-3)
    # Separate lines up to n = 40 would be far off below the limit.
    block = depth_block([(z_em, (1.0 + z_em) * rest)], setting, lines=lyman_series(40))
    alone = raw_predictions(setting, block, PLAIN.theta[None])[0]
    assert alone[0] > 1.02 * expected[0]


def whole_profile(ln_rest, b, last=150):
    """Cross-section [cm^2] of lines 2 to 150 and the continuum, whose edge is smeared by b."""
    edge = np.log(LYMAN_LIMIT / (1.0 - 1.0 / (last + 0.5) ** 2))
    speed = (ln_rest - edge) * constants.C_CGS / (b * 1e5)
    ratio = np.maximum(LYMAN_LIMIT / np.exp(ln_rest), 1.0)
    sigma = 0.5 * photoionization_cross_section(ratio) * special.erfc(speed)
    for line in lyman_series(last):
        wavelength = line.wavelength * 1e-8
        x = (ln_rest - np.log(line.wavelength)) * constants.C_CGS / (b * 1e5)
        damping = line.gamma * wavelength / (4.0 * np.pi * b * 1e5)
        scale = constants.LINE_AREA * line.f * wavelength / (np.pi**0.5 * b * 1e5)
        sigma += scale * special.wofz(x + 1j * damping).real
    return sigma


def test_no_foreground_from_beyond_the_observer():
    # Lyγ at z = 0.1 is seen at 1070 Å, where Lyα absorbers would need z < 0.
    limits = {"log_nhi_min": 12.2, "log_nhi_max": 17.2, "form": "tau"}
    meta = {"line": "gamma", **limits}
    data = [
        rows("lyman_series_opacity", [(0.1, 0.1)], foreground=foreground, **meta)
        for foreground in ("included", "removed")
    ]
    beta = rows(
        "lyman_series_opacity",
        [(1.1 * LYMAN_SERIES[2].wavelength / LYMAN_SERIES[1].wavelength - 1.0,) * 2],
        foreground="removed",
        **{**meta, "line": "beta"},
    )
    included, removed, of_beta = build_response([*data, beta], setting_of(PLAIN)).predict(
        PLAIN.theta
    )
    assert included == pytest.approx(removed + of_beta, rel=1e-12)


def stacked(z, wavelength_lo, wavelength_hi, **meta):
    data = hypothetical("continuum_flux", z, **meta)
    lo, hi = (np.array(x, dtype=float) for x in (wavelength_lo, wavelength_hi))
    return dataclasses.replace(data, wavelength_lo=lo, wavelength_hi=hi)


@FEWER
@given(truths())
def test_flux_of_a_stack_with_lines_removed(truth):
    z, ends = 3.2, [(880.0, 880.0), (850.0, 905.0)]
    data = stacked([z, z], *zip(*ends, strict=True), lines="removed")

    def flux(rest):
        return np.exp(-tau_continuum(truth, rest * (1.0 + z), z))

    mean = quad(flux, 850.0, 905.0, epsabs=1e-6, epsrel=1e-6)[0] / 55.0
    predicted = build_response([data], setting_of(truth)).predict(truth.theta)
    # Where nothing gets through, a relative error of the flux is the depth times that of the depth.
    assert_allclose(predicted, [flux(880.0), mean], rtol=RTOL, atol=2e-5)


def test_flux_over_a_reference_with_lines():
    # With one source both fluxes are exponentials of depths that are tested above.
    setting = setting_of(PLAIN)
    z, rest = 3.2, np.array([890.0, 920.0])
    block = depth_block([(z, (1.0 + z) * rest)], setting)
    tau = raw_predictions(setting, block, PLAIN.theta[None])[0]
    data = stacked([z], [890.0], [890.0], lines="included", reference_wavelength=920.0)
    predicted = build_response([data], setting).predict(PLAIN.theta)
    assert predicted[0] == pytest.approx(np.exp(tau[1] - tau[0]), rel=1e-10)
    assert predicted[0] < 1.0


def test_flux_across_the_edge_of_a_line():
    # Blueward of rest Lyα the forest absorbs, redward nothing does: the mean of a bin across.
    z = 3.0
    data = stacked([z], [1195.6701], [1235.6701], lines="included")
    setting = setting_of(PLAIN)
    blueward = stacked([z], [1195.6701], [1215.6701], lines="included")
    both, blue = (build_response([d], setting).predict(PLAIN.theta)[0] for d in (data, blueward))
    assert both == pytest.approx(0.5 * (1.0 + blue), rel=1e-12)
    assert blue < 0.9


@FEWER
@given(truths(), st.sampled_from(["removed", "included"]))
def test_lyman_beta_opacity(truth, foreground):
    limits = {"log_nhi_min": 12.2, "log_nhi_max": 17.2}
    meta = {"line": "beta", "foreground": foreground, "form": "tau", **limits}
    data = rows("lyman_series_opacity", [(3.0, 3.0)], **meta)
    alpha, beta = LYMAN_SERIES[:2]
    lines = (alpha, beta) if foreground == "included" else (beta,)
    expected = tau_lines(truth, 4.0 * beta.wavelength, 9.0, lines, (12.2, 17.2))
    predicted = build_response([data], setting_of(truth)).predict(truth.theta)
    assert predicted[0] == pytest.approx(expected, rel=RTOL)


def test_foreground_adds_the_forest_at_lower_redshift():
    setting = setting_of(PLAIN)
    limits = {"log_nhi_min": 12.2, "log_nhi_max": 17.2, "form": "tau"}
    alpha, gamma = LYMAN_SERIES[0], LYMAN_SERIES[2]
    z_alpha = 4.2 * gamma.wavelength / alpha.wavelength - 1.0
    z_beta = 4.2 * gamma.wavelength / LYMAN_SERIES[1].wavelength - 1.0
    series = "lyman_series_opacity"
    data = [
        rows(series, [(3.2, 3.2)], line="gamma", foreground="included", **limits),
        rows(series, [(3.2, 3.2)], line="gamma", foreground="removed", **limits),
        rows(series, [(z_beta, z_beta)], line="beta", foreground="removed", **limits),
        rows("lya_opacity", [(z_alpha, z_alpha)], **limits),
    ]
    whole, own, beta, alpha = build_response(data, setting).predict(PLAIN.theta)
    assert whole == pytest.approx(own + beta + alpha, rel=1e-10)
    assert own < beta < alpha
