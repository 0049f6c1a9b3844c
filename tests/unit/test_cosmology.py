"""Cosmology against closed forms, astropy's own lengths and adaptive quadrature."""

import numpy as np
import pytest
from astropy import constants
from astropy.cosmology import FlatLambdaCDM
from numpy.testing import assert_allclose
from scipy import integrate

from fogline.cosmology import C_KM_S, Cosmology

REDSHIFTS = np.array([0.0, 0.1, 1.0, 2.5, 4.0, 7.0, 10.0])


@pytest.mark.parametrize("matter", [0.05, 0.3, 0.7])
def test_flat_absorption_distance_has_a_closed_form(matter):
    expansion = np.sqrt(matter * (1.0 + REDSHIFTS) ** 3 + 1.0 - matter)
    cosmology = Cosmology(70.0, matter)
    assert_allclose(
        cosmology.absorption_distance(REDSHIFTS),
        2.0 / (3.0 * matter) * (expansion - 1.0),
        rtol=1e-10,
    )
    assert_allclose(cosmology.dx_dz(REDSHIFTS), (1.0 + REDSHIFTS) ** 2 / expansion, rtol=1e-12)
    assert_allclose(cosmology.hubble(REDSHIFTS), 70.0 * expansion, rtol=1e-12)


def test_einstein_de_sitter():
    cosmology = Cosmology(50.0, 1.0)
    path = 2.0 / 3.0 * ((1.0 + REDSHIFTS) ** 1.5 - 1.0)
    assert_allclose(cosmology.absorption_distance(REDSHIFTS), path, rtol=1e-10)
    # Comoving 2 c/H0 (1 - (1+z)^-1/2), light travel 2/3 c/H0 (1 - (1+z)^-3/2).
    comoving = 2.0 * C_KM_S / 50.0 * (1.0 - (1.0 + REDSHIFTS) ** -0.5)
    proper = 2.0 / 3.0 * C_KM_S / 50.0 * (1.0 - (1.0 + REDSHIFTS) ** -1.5)
    assert_allclose(cosmology.comoving_length(0.0, REDSHIFTS), comoving, rtol=1e-10)
    assert_allclose(cosmology.proper_length(0.0, REDSHIFTS), proper, rtol=1e-10)


def test_empty_universe():
    cosmology = Cosmology(70.0, 0.0, 0.0)
    path = 0.5 * ((1.0 + REDSHIFTS) ** 2 - 1.0)
    assert_allclose(cosmology.absorption_distance(REDSHIFTS), path, rtol=1e-10)
    comoving = C_KM_S / 70.0 * np.log1p(REDSHIFTS)
    assert_allclose(cosmology.comoving_length(0.0, REDSHIFTS), comoving, rtol=1e-10)


def test_lengths_agree_with_astropy():
    cosmology, astropy = Cosmology(70.0, 0.3), FlatLambdaCDM(70.0, 0.3, Tcmb0=0.0)
    near, far = np.array([0.0, 2.0, 3.9]), np.array([1.0, 3.5, 4.0])
    comoving = astropy.comoving_distance(far) - astropy.comoving_distance(near)
    travel = (astropy.lookback_time(far) - astropy.lookback_time(near)) * constants.c
    assert_allclose(cosmology.comoving_length(near, far), comoving.to_value("Mpc"), rtol=1e-9)
    assert_allclose(cosmology.proper_length(near, far), travel.to_value("Mpc"), rtol=1e-7)


@pytest.mark.parametrize(("matter", "dark"), [(0.3, 0.0), (0.2, 1.1), (0.3, 0.6)])
def test_curved_space_agrees_with_quadrature(matter, dark):
    def expansion(z):
        curvature = 1.0 - matter - dark
        return np.sqrt(matter * (1.0 + z) ** 3 + curvature * (1.0 + z) ** 2 + dark)

    cosmology = Cosmology(70.0, matter, dark)
    path = integrate.quad(lambda z: (1.0 + z) ** 2 / expansion(z), 0.0, 4.0, epsrel=1e-12)[0]
    comoving = integrate.quad(lambda z: 1.0 / expansion(z), 2.0, 4.0, epsrel=1e-12)[0]
    proper = integrate.quad(lambda z: 1.0 / expansion(z) / (1.0 + z), 2.0, 4.0, epsrel=1e-12)[0]
    assert_allclose(cosmology.absorption_distance(4.0), path, rtol=1e-10)
    assert_allclose(cosmology.comoving_length(2.0, 4.0), C_KM_S / 70.0 * comoving, rtol=1e-10)
    assert_allclose(cosmology.proper_length(2.0, 4.0), C_KM_S / 70.0 * proper, rtol=1e-10)


def test_lengths_broadcast_and_change_sign_with_their_limits():
    cosmology = Cosmology(70.0, 0.3)
    lengths = cosmology.proper_length(np.array([[2.0], [3.0]]), np.array([2.0, 3.0, 4.0]))
    assert lengths.shape == (2, 3)
    assert lengths[0, 0] == 0.0
    assert_allclose(lengths[0, 1], -lengths[1, 0], rtol=1e-13)
    assert_allclose(lengths[0, 2], lengths[0, 1] + lengths[1, 2], rtol=1e-12)


def test_lengths_scale_with_the_inverse_hubble_constant():
    short, long = (Cosmology(h0, 0.3).proper_length(2.0, 3.0) for h0 in (100.0, 50.0))
    assert_allclose(long, 2.0 * short, rtol=1e-13)
    assert Cosmology(72.0, 0.3).h == 0.72


def test_critical_density():
    # 3 H0^2 / (8 pi G) = 2.7754e11 h^2 M_sun Mpc^-3, derived from CODATA G and the IAU's GM_sun.
    assert Cosmology(70.0, 0.3).critical_density == pytest.approx(2.7754e11 * 0.49, rel=1e-4)


def test_equality_is_that_of_the_three_numbers():
    assert Cosmology(70.0, 0.3) == Cosmology(70.0, 0.3)
    assert Cosmology(70.0, 0.3) != Cosmology(72.0, 0.3)
    assert len({Cosmology(70.0, 0.3), Cosmology(70.0, 0.3), Cosmology(70.0, 0.3, 0.6)}) == 2


@pytest.mark.parametrize(
    ("numbers", "message"),
    [
        ((0.0, 0.3), r"H0 must be positive \[km/s/Mpc\], got 0.0"),
        ((float("nan"), 0.3), "H0 must be positive"),
        ((70.0, -0.1), "Om0 must not be negative, got -0.1"),
        ((70.0, float("nan")), "Om0 must not be negative"),
        ((70.0, 0.1, 3.0), "no expansion from z = 10 to 0 with Om0=0.1, Ode0=3.0"),
        ((70.0, 0.3, float("nan")), "no expansion from z = 10 to 0"),
    ],
)
def test_impossible_cosmologies_are_refused(numbers, message):
    with pytest.raises(ValueError, match=message):
        Cosmology(*numbers)
