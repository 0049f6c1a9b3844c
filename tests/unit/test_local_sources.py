"""The local-source relation: a closed form, a round trip, units, and the breakthrough."""

import dataclasses

import numpy as np
import pytest
from astropy import constants, units
from numpy.testing import assert_allclose
from scipy.integrate import quad
from scipy.optimize import brentq

import reference_integrals as reference
from fogline.atomic import photoionization_cross_section
from fogline.derived import DERIVED_TABLES, Draws
from fogline.derived.ionizing_background import crossing
from fogline.local_sources import Spectrum, opacity_block, rate_per_emissivity
from small_study import ANALYSIS, EVOLUTION_PIVOTS, EXPONENTS, LOG_F, PIVOTS, SETTING, THETA

DERIVE = ANALYSIS.derive
TRUTH = reference.Truth(
    2.5, PIVOTS, LOG_F, EVOLUTION_PIVOTS, EXPONENTS, reference.background(70.0, 0.3)
)
Z = np.array([2.0, 3.0, 4.0])


def draws(kind="", value=1.0, **changes):
    given = {"z": Z, "value": np.full(3, value), "err": np.full(3, 0.1 * value)} if kind else {}
    return Draws(THETA[None], SETTING, DERIVE, background_kind=kind, background=given, **changes)


def curves(kind="", value=1.0):
    return DERIVED_TABLES["ionizing_background"].curves(draws(kind, value))


def test_rate_of_a_constant_path_and_a_cubic_cross_section():
    """σ = σ_912 x^-3 and λ constant: Γ = ε λ σ_912 (1+z)^3 / [h (α + 3)] (closed form)."""
    spectrum = Spectrum(1.7, 1e3)
    x, weights = spectrum.nodes()
    exact = rate_per_emissivity(np.full((1, len(x)), 0.01), 3.0, spectrum)[0]
    h, mpc = constants.h.to_value("erg s"), units.Mpc.to("cm")
    cubic = 100.0 * 6.304e-18 * 4.0**3 / h / mpc**2 / (1.7 + 3.0)
    # The exact cross-section lies above the cube near the limit: by 5 to 20% in the integral.
    assert 1.05 < exact / cubic < 1.2
    # With the cube itself the nodes give the closed form.
    cube = 100.0 * 4.0**3 / h / mpc**2 * 6.304e-18 * (weights * x**-3.0).sum()
    assert cube == pytest.approx(cubic, rel=1e-3)


def test_rate_against_quadrature_over_frequency():
    spectrum = Spectrum(1.5, 4.0)
    x, _ = spectrum.nodes()
    opacity = Draws(THETA[None], SETTING, DERIVE).integrate(opacity_block(3.0, x, SETTING))
    found = rate_per_emissivity(opacity, 3.0, spectrum)[0]
    cosmology = TRUTH.cosmology

    def integrand(ratio):
        per_mpc = TRUTH.opacity(3.0, ratio) * reference.dx_dz(cosmology, 3.0)
        per_mpc *= 4.0 * cosmology.H(3.0).value / reference.C_KM_S
        return ratio**-2.5 * float(photoionization_cross_section(ratio)) / per_mpc

    integral = quad(integrand, 1.0, 4.0, epsrel=1e-8)[0] * units.Mpc * units.cm**2
    expected = (64.0 / units.Mpc**3 * units.erg / units.s / units.Hz / constants.h * integral).to(
        "1/s"
    )
    assert found == pytest.approx(expected.value, rel=1e-5)


def test_emissivity_and_rate_go_there_and_back():
    emissivity = curves("photoionization_rate", 1e-12)["emissivity"].values[0]
    given = {"z": Z, "value": emissivity, "err": 0.1 * emissivity}
    back = Draws(THETA[None], SETTING, DERIVE, background_kind="emissivity", background=given)
    rate = DERIVED_TABLES["ionizing_background"].curves(back)["gamma_hi"].values[0]
    assert_allclose(rate, 1e-12, rtol=1e-10)


def test_mean_intensity_over_one_free_path():
    found = curves("mean_intensity", 4e-22)["emissivity"].values[0]
    path = [reference.local_free_path(TRUTH, z, TRUTH.cosmology) for z in Z] * units.Mpc
    j = 4e-22 * units.erg / (units.s * units.cm**2 * units.Hz)
    expected = (4.0 * np.pi * j / path / (1.0 + Z) ** 3).to_value("erg / (s Hz Mpc3)")
    assert_allclose(found, expected, rtol=1e-5)


def test_photons_of_a_power_law():
    # ∫ x^(-α-1) dx from 1 to 4 is (1 - 4^-α) / α.
    spectrum = Spectrum(1.7, 4.0)
    expected = (1.0 - 4.0**-1.7) / 1.7 / constants.h.to_value("erg s")
    assert spectrum.photons_per_emissivity() == pytest.approx(expected, rel=1e-10)


def test_errors_of_the_given_table_enter():
    many = dataclasses.replace(
        draws("photoionization_rate", 1e-12), theta=np.tile(THETA, (4000, 1))
    )
    emissivity = DERIVED_TABLES["ionizing_background"].curves(many)["emissivity"].values
    # One draw of f alone: the scatter of ln ε is the 10% of the given rate.
    assert np.log(emissivity).std(axis=0) == pytest.approx(0.1, rel=0.05)


def test_validity_is_where_the_path_is_short():
    table = DERIVED_TABLES["ionizing_background"]
    one = draws()
    ratio = table.curves(one)["path_over_horizon"].values[0]
    assert_allclose(table.keys(one)["valid"][0], ratio < 0.1)
    path = [reference.local_free_path(TRUTH, z, TRUTH.cosmology) for z in Z]
    assert_allclose(ratio, path * TRUTH.cosmology.H(Z).value / reference.C_KM_S, rtol=1e-5)
    assert "not at z <= 2.00" in table.note(one)


def test_breakthrough_redshift_and_exponent():
    def excess(z):
        path = reference.local_free_path(TRUTH, z, TRUTH.cosmology)
        return path * TRUTH.cosmology.H(z).value / reference.C_KM_S - 1.0

    found = DERIVED_TABLES["breakthrough"].curves(draws())
    assert found["z_breakthrough"].values[0, 0] == pytest.approx(brentq(excess, 0.3, 3.0), abs=2e-4)
    path = [reference.local_free_path(TRUTH, z, TRUTH.cosmology) for z in (2.0, 4.0)]
    exponent = np.log(path[1] / path[0]) / np.log(5.0 / 3.0)
    assert found["path_exponent"].values[0, 0] == pytest.approx(exponent, abs=2e-3)


def test_crossing_is_the_last_rise_through_zero():
    z = np.array([1.0, 2.0, 3.0, 4.0])
    rows = np.array([[-1.0, 1.0, -1.0, 1.0], [1.0, 1.0, 1.0, 1.0], [1.0, -1.0, -2.0, -3.0]])
    found = crossing(z, rows)
    assert 3.0 < found[0] < 4.0
    assert np.isinf(found[1:]).all()
