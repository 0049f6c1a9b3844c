"""Atomic data of hydrogen against theory and published numbers.

The table under test is that of Morton 2003, ApJS 149, 205 (status: copy, two copies agree). Here
every column of it is derived anew: wavelengths from the Rydberg formula with fine structure,
oscillator strengths from their closed form, damping constants from radial integrals.
"""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import constants as codata
from scipy import integrate, special

from fogline import constants
from fogline.atomic import (
    LYMAN_ALPHA,
    LYMAN_LIMIT,
    LYMAN_SERIES,
    SIGMA_912,
    lyman_series,
    photoionization_cross_section,
)

N = np.array([line.n for line in LYMAN_SERIES], dtype=float)
MASS_RATIO = codata.m_e / codata.m_p
LIMIT = 109678.77  # wavenumber of the Lyman limit [cm^-1]; NIST, status: memory


def oscillator_strength(n):
    """Textbook closed form for 1s-np and a nucleus of infinite mass."""
    return 2.0**8 * n**5 * (n - 1.0) ** (2 * n - 4) / (3.0 * (n + 1.0) ** (2 * n + 4))


def test_series_is_complete():
    assert N.tolist() == list(range(2, 13))
    assert LYMAN_ALPHA is LYMAN_SERIES[0]


def test_published_values_of_the_closed_form():
    # Textbook closed form, status: derived; tolerance: half the last digit of each.
    derived = [0.416197, 0.0791016, 0.0289910, 0.0139383, 0.00779949]
    digits = np.array([1e-6, 1e-7, 1e-7, 1e-7, 1e-8])
    assert np.all(np.abs(oscillator_strength(N[:5]) - derived) <= 0.51 * digits)


def test_oscillator_strengths_of_the_table():
    # The motion of the nucleus raises f by 1 + m_e/m_p; the table has it for some lines and not
    # for others, so each value must lie between the two, give or take half its last digit.
    table = np.array([line.f for line in LYMAN_SERIES])
    digits = np.array([1e-4, 1e-5, 1e-5, 1e-5, 1e-6, 1e-6, 1e-6, 1e-6, 1e-6, 1e-5, 1e-6])
    fixed_nucleus = oscillator_strength(N)
    assert np.all(table >= fixed_nucleus - 0.51 * digits)
    assert np.all(table <= fixed_nucleus * (1.0 + MASS_RATIO) + 0.51 * digits)


def test_higher_lines_follow_the_closed_forms():
    # Textbook closed form and Rydberg formula, status: derived. They continue the table: those of
    # n = 12 differ from it by no more than its digits (f) and fine structure (2e-7 of λ).
    higher = lyman_series(60)[len(LYMAN_SERIES) :]
    assert [line.n for line in higher] == list(range(13, 61))
    n = np.array([line.n for line in higher], dtype=float)
    # Written for large n, where powers of n overflow: (1 - 1/n)^(2n-4) / (1 + 1/n)^(2n+4) / n^3.
    f = 256.0 / 3.0 * (1.0 - 1.0 / n) ** (2 * n - 4) / (1.0 + 1.0 / n) ** (2 * n + 4) / n**3
    assert_allclose([line.f for line in higher], f, rtol=1e-12)
    assert_allclose([1e8 / line.wavelength for line in higher], LIMIT * (1 - 1 / n**2), rtol=5e-8)
    last = LYMAN_SERIES[-1]
    assert oscillator_strength(12.0) == pytest.approx(last.f, abs=5.1e-7)
    assert LYMAN_LIMIT / (1.0 - 1.0 / 144.0) == pytest.approx(last.wavelength, rel=3e-7)


@pytest.mark.parametrize("n", [13, 20, 40])
def test_damping_constants_of_higher_lines(n):
    # Scaled as n^-3 from n = 12, like the table above n = 6 the decay to the ground state alone.
    # Its exact n-dependence is f (1 - 1/n^2)^2 (status: derived), within 1.5% of n^-3 here.
    line = lyman_series(n)[-1]
    exact = LYMAN_SERIES[-1].gamma * oscillator_strength(n) / oscillator_strength(12.0)
    exact *= ((1.0 - 1.0 / n**2) / (1.0 - 1.0 / 144.0)) ** 2
    assert line.gamma == pytest.approx(exact, rel=0.015)


def test_series_passes_into_the_continuum():
    # Continuity of oscillator strength per frequency across the limit (textbook, status: derived):
    # π e²/(m_e c) f_n over the spacing of the lines, (ν_{n+1/2} - ν_{n-1/2}), tends to σ_912.
    lines = lyman_series(200)
    for n, tolerance in ((20, 8e-3), (60, 1e-3), (200, 3e-4)):
        spacing = codata.c * LIMIT * 100.0 * (1.0 / (n - 0.5) ** 2 - 1.0 / (n + 0.5) ** 2)
        mean = constants.LINE_AREA * lines[n - 2].f / spacing
        assert mean == pytest.approx(SIGMA_912, rel=tolerance)


def test_wavelengths_of_the_table():
    # Upper level with fine structure, averaged over j = 1/2 and 3/2 with the lines' strengths 1:2,
    # (Sommerfeld): binding R/n^2 [1 + alpha^2/n^2 (2n/3 - 3/4)]. Tolerance: 2e-7 for the limit's
    # digits, remembered to 0.005 cm^-1, and the table's 0.00005 Angstrom.
    rydberg = codata.Rydberg / 100.0 / (1.0 + MASS_RATIO)
    fine = 1.0 + (codata.alpha / N) ** 2 * (2.0 * N / 3.0 - 0.75)
    expected = 1e8 / (LIMIT - rydberg / N**2 * fine)
    assert_allclose([line.wavelength for line in LYMAN_SERIES], expected, rtol=2e-7)


def test_lyman_limit():
    # NIST, status: memory. Re-derived: Rydberg energy of the atom, fine structure of the ground
    # state alpha^2/4, less its Lamb shift 0.273 cm^-1 (memory); good to 0.01 cm^-1.
    rydberg = codata.Rydberg / 100.0 / (1.0 + MASS_RATIO)
    assert rydberg * (1.0 + codata.alpha**2 / 4.0) - 0.273 == pytest.approx(LIMIT, abs=0.01)
    assert LYMAN_LIMIT == pytest.approx(1e8 / LIMIT, abs=5e-5)


def radial(n, ell, r):
    norm = np.sqrt(
        (2.0 / n) ** 3 * special.factorial(n - ell - 1) / (2 * n * special.factorial(n + ell))
    )
    x = 2.0 * r / n
    return norm * np.exp(-0.5 * x) * x**ell * special.eval_genlaguerre(n - ell - 1, 2 * ell + 1, x)


def decay_rate(n, lower, ell):
    """Einstein A of np -> (lower, ell) [s^-1], dipole length form, nucleus in motion."""
    dipole = integrate.quad(
        lambda r: r**3 * radial(n, 1, r) * radial(lower, ell, r), 0.0, 40.0 * n, limit=300
    )[0]
    frequency = 0.5 * (1.0 / lower**2 - 1.0 / n**2)  # atomic units
    atomic_unit = 1.0 / codata.physical_constants["atomic unit of time"][0]
    rate = 4.0 / 9.0 * codata.alpha**3 * frequency**3 * max(ell, 1) * dipole**2
    return rate * atomic_unit / (1.0 + MASS_RATIO)


@pytest.mark.parametrize("line", LYMAN_SERIES, ids=lambda line: f"n={line.n}")
def test_damping_constants_of_the_table(line):
    # Up to n = 6 all decays of the level, from 7 on that to the ground state alone (20% less),
    # as found by this very check. Tolerance: half the table's fourth digit.
    lower = range(1, line.n) if line.n <= 6 else [1]
    rates = [decay_rate(line.n, low, ell) for low in lower for ell in (0, 2) if ell < low]
    assert line.gamma == pytest.approx(sum(rates), rel=3e-4)


def test_line_area():
    # pi e^2/(m_e c) = pi r_e c from CODATA's electron radius, which is not used to build it.
    radius_cm = codata.physical_constants["classical electron radius"][0] * 100.0
    assert constants.LINE_AREA == pytest.approx(np.pi * radius_cm * codata.c * 100.0, rel=1e-8)


def test_mass_of_the_atom():
    # 1.00782503 u (atomic mass evaluation, status: memory).
    assert_allclose(constants.M_HYDROGEN, 1.00782503 * codata.u * 1e3, rtol=5e-9)


def test_lengths_and_masses():
    # Definition: 1 pc = 648000/pi au, au = 149597870700 m (IAU 2012 and 2015, status: memory).
    assert constants.MPC_CM == pytest.approx(648000.0 / np.pi * 149597870700.0 * 1e8, rel=1e-12)
    # GM_sun = 1.3271244e20 m^3 s^-2 (IAU 2015 B3, status: memory).
    assert constants.SOLAR_MASS == pytest.approx(1.3271244e20 / codata.G * 1e3, rel=1e-9)


def exact_cross_section_at_the_limit():
    """2^9 pi^2 / (3 e^4) alpha a0^2 with e = exp(1) [cm^2]."""
    bohr_cm = codata.physical_constants["Bohr radius"][0] * 100.0
    return 2.0**9 * np.pi**2 / (3.0 * np.exp(4.0)) * codata.alpha * bohr_cm**2


def test_cross_section_at_the_limit():
    # 6.304e-18 (Osterbrock & Ferland 2006) is the exact 6.30432e-18 (derived) to its four digits.
    exact = exact_cross_section_at_the_limit()
    assert SIGMA_912 == pytest.approx(exact, abs=0.5e-21)


def test_cross_section_table():
    # Osterbrock & Ferland formula, status: derived, with the exact value at the limit, 5e-5 above
    # the four digits in use; tolerance: half the last digit.
    exact = exact_cross_section_at_the_limit()
    ratios = np.array([1.0, 1.5, 2.0, 4.0, 10.0])
    table = np.array([6.304e-18, 2.091e-18, 9.314e-19, 1.230e-19, 7.424e-21])
    digits = np.array([1e-21, 1e-21, 1e-22, 1e-22, 1e-24])
    ours = photoionization_cross_section(ratios) / SIGMA_912 * exact
    assert np.all(np.abs(ours - table) <= 0.51 * digits)


def fitted_cross_section(energy_ratio):
    """Fit of Verner et al. 1996, ApJ 465, 487, eq. 1, for H I (status: copy, several agree)."""
    x = energy_ratio * 13.59844 / 0.4298
    return (
        5.475e-14 * (x - 1.0) ** 2 * x ** (0.5 * 2.963 - 5.5) * (1.0 + np.sqrt(x / 32.88)) ** -2.963
    )


def test_cross_section_against_the_published_fit():
    # Status of the fit's parameters: copy; of its differences from exact: derived. It is 0.7% above
    # at threshold and within 0.5% from 1.12 to 10 Ryd.
    excess = fitted_cross_section(1.0) / photoionization_cross_section(1.0) - 1.0
    assert excess == pytest.approx(0.0070, abs=5e-5)
    ratios = np.linspace(1.12, 10.0, 200)
    assert_allclose(fitted_cross_section(ratios), photoionization_cross_section(ratios), rtol=5e-3)
