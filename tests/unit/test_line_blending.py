"""Overlapping lines against the plain sum of hundreds of them, and their limits."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import special

from fogline import constants
from fogline.atomic import LYMAN_LIMIT, SIGMA_912, equivalent_width, lyman_series
from fogline.line_blending import (
    BLENDED_WAVELENGTHS,
    FIRST_LEVEL,
    LAST_CELL,
    blended_widths,
    edge_above,
    mean_blended_widths,
)

LAST = 400


def crowd(ln_wave, b, first, last=LAST):
    """Cross-section of lines `first` to 400 [cm^2]; what is beyond is continuum to every digit."""
    b_cgs = b * 1e5
    edge = LYMAN_LIMIT / (1.0 - 1.0 / (last + 0.5) ** 2)
    sigma = 0.5 * SIGMA_912 * special.erfc((ln_wave - np.log(edge)) * constants.C_CGS / b_cgs)
    for line in lyman_series(last)[first - 2 :]:
        wavelength = line.wavelength * 1e-8
        x = (ln_wave - np.log(line.wavelength)) * constants.C_CGS / b_cgs
        damping = line.gamma * wavelength / (4.0 * np.pi * b_cgs)
        scale = constants.LINE_AREA * line.f * wavelength / (np.pi**0.5 * b_cgs)
        sigma += scale * special.wofz(x + 1j * damping).real
    return sigma


def crowd_width(log_nhi, b, first, margin=20.0):
    """W/λ of the whole crowd by the trapezoid rule."""
    lo, hi = np.log([LYMAN_LIMIT, lyman_series(first)[-1].wavelength])
    hi += margin * b * 1e5 / constants.C_CGS
    ln_wave = np.linspace(lo, hi, int((hi - lo) / (0.02 * b * 1e5 / constants.C_CGS)))
    sigma = crowd(ln_wave, b, first)
    return [np.trapezoid(-np.expm1(-(10.0**n) * sigma), ln_wave) for n in log_nhi]


@pytest.mark.parametrize("b", [5.0, 26.0, 150.0])
def test_crowd_agrees_with_the_plain_sum_of_lines(b):
    # 6e-4: lines beyond the resolved ones taken as merged, and spilled over the limit.
    log_nhi = np.array([12.0, 15.0, 16.5, 17.5, 19.0, 22.0])
    ours = blended_widths(log_nhi, b).sum(axis=0)
    assert_allclose(ours, crowd_width(log_nhi, b, FIRST_LEVEL), rtol=7e-4)


def test_cells_agree_one_by_one_where_lines_are_thick():
    b, log_nhi = 26.0, 17.7
    cells = blended_widths([log_nhi], b)[:, 0]
    for cell, n in ((1, 14), (4, 17), (10, 23)):
        ln_wave = np.linspace(np.log(edge_above(n)), np.log(edge_above(n - 1)), 4001)
        absorbed = -np.expm1(-(10.0**log_nhi) * crowd(ln_wave, b, FIRST_LEVEL))
        assert cells[cell] == pytest.approx(np.trapezoid(absorbed, ln_wave), rel=1e-4)


def test_thin_absorbers_see_every_line_and_the_merged_rest():
    # Σ_{n>12} of the thin widths, π e^2/(m_e c^2) N f λ, and the integral that replaces the tail.
    lines = lyman_series(LAST)[FIRST_LEVEL - 2 :]
    each = [line.f * line.wavelength * 1e-8 for line in lines]
    tail = SIGMA_912 * np.log(edge_above(LAST) / LYMAN_LIMIT)
    expected = 1e12 * (constants.LINE_AREA / constants.C_CGS * np.sum(each) + tail)
    assert blended_widths([12.0], 26.0).sum() == pytest.approx(expected, rel=5e-4)


def test_black_absorbers_take_out_the_band_and_no_more():
    band = np.log(edge_above(FIRST_LEVEL - 1) / LYMAN_LIMIT)
    cells = blended_widths([20.3], 26.0)[:, 0]
    borders = np.log([edge_above(n) for n in range(FIRST_LEVEL, LAST_CELL + 1)] + [LYMAN_LIMIT])
    # Black from border to border, from n = 17 on.
    assert_allclose(cells[4:], -np.diff(borders)[3:], rtol=2e-3)
    assert cells.sum() < band
    # Separate lines would take out more than there is.
    alone = [equivalent_width(20.3, 26.0, line) / line.wavelength for line in lyman_series(40)[11:]]
    assert sum(alone) > 2.0 * band


def test_lines_up_to_twelve_hardly_overlap():
    # That is why they are left out here: lines 8 to 12 alone and the crowd, against all together.
    log_nhi = np.array([16.0, 18.0, 20.0, 21.0])
    together = crowd_width(log_nhi, 26.0, 8, margin=300.0)
    alone = [equivalent_width(log_nhi, 26.0, line) / line.wavelength for line in lyman_series(12)]
    ours = np.sum(alone[6:], axis=0) + blended_widths(log_nhi, 26.0).sum(axis=0)
    assert_allclose(ours, together, rtol=3e-4)


def test_widths_grow_with_column_and_lie_at_the_lines():
    widths = blended_widths(np.linspace(12.0, 22.5, 22), 26.0)
    assert widths.shape == (len(BLENDED_WAVELENGTHS), 22)
    assert np.all(np.diff(widths, axis=1) >= 0.0)
    assert np.all(np.diff(widths.sum(axis=0)) > 0.0)
    assert np.all(np.diff(BLENDED_WAVELENGTHS) < 0.0)
    assert LYMAN_LIMIT < BLENDED_WAVELENGTHS[-1] < edge_above(LAST_CELL)


def test_mean_over_doppler_parameters():
    log_nhi = np.array([14.0, 17.0])
    fixed = mean_blended_widths(log_nhi, {"dist": "fixed", "b": 30.0})
    assert_allclose(fixed, blended_widths(log_nhi, 30.0), rtol=1e-12)
    spread = mean_blended_widths(log_nhi, {"dist": "uniform", "loc": 20.0, "scale": 20.0})
    nodes, weights = np.polynomial.legendre.leggauss(8)
    each = [blended_widths(log_nhi, 30.0 + 10.0 * x).sum(axis=0) for x in nodes]
    assert_allclose(spread.sum(axis=0), 0.5 * weights @ np.array(each), rtol=2e-4)
