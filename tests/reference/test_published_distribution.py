"""A whole published distribution through fogline's Lyman-continuum machinery.

Inoue, Shimizu, Iwata & Tanaka 2014 (MNRAS 442, 1805): the number of absorbers per dz and dN is the
sum of two components f_i(z) g_i(N) with g_i ∝ N^-β exp(-N/N_c) from log N = 12, ∫ g dN = 1 (status
of the distribution: memory; of their fits to its continuum optical depth: copy). The fits take the
cross-section to fall as ν^-3, and so does fogline here, where it is compared with them over long
paths; its own, exact cross-section then gives up to 10% more, which a test below states.

Left out: their line coefficients, which exact Voigt profiles do not reproduce (Lyα of the LAF is
7% low, of the DLAs eight times off); the fits where a path crosses a break of f_i(z), of which
fogline's single power has none (a separate integrator over the breaks agrees to 2.5% but for short
wavelengths seen from z > 4, where the fits' own approximation is 3 to 4% off); and the free paths
at z = 5.2, 8.9 (local) and 9.5 proper Mpc (unit depth), for which the distribution as recalled
gives 8.5 and 9.1.
"""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose

import fogline.unit_depth
from fogline.atomic import SIGMA_912, photoionization_cross_section
from fogline.datasets import hypothetical
from fogline.response import build_response
from published_functions import DLA, FLAT, LAF, LAF_HIGH, whole


def inverse_cube(ratio):
    return SIGMA_912 * np.asarray(ratio, dtype=float) ** -3.0


def fit_laf(x, big):
    return 0.0255 * (big**1.6 * x**2.1 - x**3.7)


def fit_laf_high(x, big):
    return 5.22e-4 * (big**3.4 * x**2.1 - x**5.5)


def fit_dla(x, big):
    return 0.047 * big**3 - 0.0178 * big**3.3 * x**-0.3 - 0.0292 * x**3


# The LAF's fit is 2 to 2.5% high everywhere, the DLAs' 0.15%: their coefficients have three digits.
CASES = [
    (LAF, fit_laf, 2.2, 2.5, 0.025),
    (LAF, fit_laf, 2.2, 3.5, 0.025),
    (LAF, fit_laf, 2.2, 4.6, 0.025),
    (LAF_HIGH, fit_laf_high, 5.7, 6.0, 0.025),
    (DLA, fit_dla, 3.0, 2.5, 0.003),
    (DLA, fit_dla, 3.0, 3.5, 0.003),
    (DLA, fit_dla, 3.0, 4.6, 0.003),
]


def wavelengths(shortest, z_em):
    return np.linspace(shortest, 1.0 + z_em, 8)[:-1]


@pytest.mark.parametrize(("component", "fit", "shortest", "z_em", "tolerance"), CASES)
def test_published_fits_of_the_continuum(monkeypatch, component, fit, shortest, z_em, tolerance):
    monkeypatch.setattr(fogline.unit_depth, "photoionization_cross_section", inverse_cube)
    x = wavelengths(shortest, z_em)
    depths = [component.tau(wave - 1.0, z_em) for wave in x]
    assert_allclose(depths, fit(x, 1.0 + z_em), rtol=tolerance)


@pytest.mark.parametrize(("component", "fit", "shortest", "z_em", "tolerance"), CASES)
def test_exact_cross_section_absorbs_more_the_longer_the_path(
    monkeypatch, component, fit, shortest, z_em, tolerance
):
    x = wavelengths(shortest, z_em)
    exact = np.array([component.tau(wave - 1.0, z_em) for wave in x])
    monkeypatch.setattr(fogline.unit_depth, "photoionization_cross_section", inverse_cube)
    cubic = np.array([component.tau(wave - 1.0, z_em) for wave in x])
    excess = exact / cubic - 1.0
    assert np.all(np.diff(excess) < 0.0)  # from the longest path to the shortest
    # No more than by the ratio of the cross-sections at the far end, 15% at 2 Ryd.
    farthest = (1.0 + z_em) / x[0]
    assert np.all(excess > 0.0)
    assert np.all(excess < photoionization_cross_section(farthest) / inverse_cube(farthest) - 1.0)


@pytest.mark.parametrize(("z", "local", "unit_depth"), [(2.44, 166.0, 320.0), (3.0, 80.0, 110.0)])
def test_definitions_of_the_free_path_differ_as_published(monkeypatch, z, local, unit_depth):
    # Proper Mpc for H0 = 70, Om0 = 0.3 (status: derived, from this distribution).
    monkeypatch.setattr(fogline.unit_depth, "photoionization_cross_section", inverse_cube)
    setting, theta = whole(z)

    def length(definition):
        data = hypothetical(
            "mean_free_path", [z], unit="Mpc", definition=definition, frame="proper"
        )
        data = dataclasses.replace(data, cosmology=FLAT)
        return build_response([data], setting).predict(theta)[0]

    assert length("local") == pytest.approx(local, rel=0.01)
    # 2.5%: the longer path depends on the evolution and the cross-section beyond two digits.
    assert length("unit_depth") == pytest.approx(unit_depth, rel=0.025)
