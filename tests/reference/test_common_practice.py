"""Orders of magnitude that everyone in the trade knows (common practice, no source).

The distribution is that of Inoue et al. 2014 (`published_functions`), which nobody made for these
tests. Left out: breakthrough near z = 1.6, since this distribution, and any that is fitted above
z = 2 and extrapolated, puts it below z = 1.2.
"""

import dataclasses

import numpy as np
import pytest
from scipy.optimize import brentq

from fogline.atomic import LYMAN_LIMIT, log_nhi_at_tau, photoionization_cross_section
from fogline.datasets import hypothetical
from fogline.response import build_response
from fogline.unit_depth import continuum_weights, redshift_grid
from published_functions import DLA, EDS, FLAT, whole


def predict(quantity, z, **meta):
    setting, theta = whole(z)
    data = dataclasses.replace(hypothetical(quantity, [z], **meta), cosmology=FLAT)
    return build_response([data], setting).predict(theta)[0]


def free_path(z, definition="unit_depth", frame="proper"):
    return predict("mean_free_path", z, unit="Mpc", definition=definition, frame=frame)


def depth_by_column(z_912, z_em):
    """log N and the contributions to τ_LC between two redshifts."""
    setting, theta = whole(z_em)
    grid = redshift_grid(z_em)
    log_nhi, weights = continuum_weights(z_912, z_em, grid, setting.distribution, EDS)
    f = np.array([10.0 ** setting.distribution.log_f(theta, log_nhi, z) for z in grid])
    return log_nhi, (f * weights).sum(axis=0)


def z_of_unit_depth(z_em):
    length = free_path(z_em)
    return brentq(lambda z: float(FLAT.proper_length(z, z_em)) - length, 0.5 * z_em, z_em)


def test_unit_depth_at_three_and_a_half():
    # "Δz ≈ 0.3, of order 100 Mpc": one significant digit, and proper and comoving lengths about it.
    assert 3.5 - z_of_unit_depth(3.5) == pytest.approx(0.3, abs=0.05)
    assert 30.0 < free_path(3.5) < 100.0 < free_path(3.5, frame="comoving") < 300.0


def test_half_of_it_is_thin_and_half_thick():
    log_nhi, depth = depth_by_column(z_of_unit_depth(3.5), 3.5)
    assert depth.sum() == pytest.approx(1.0, rel=1e-4)
    # "Below or around τ = 1": up to 1, and up to 2.
    assert 0.35 < depth[log_nhi < log_nhi_at_tau(1.0)].sum() < 0.6
    assert 0.4 < depth[log_nhi < log_nhi_at_tau(2.0)].sum() < 0.6


def test_filter_just_below_the_limit():
    # 100 Å below the limit of a source at z = 3.5: τ ≈ 0.25, a correction of 30%.
    limit = LYMAN_LIMIT * 4.5
    depths = [
        depth_by_column(wave / LYMAN_LIMIT - 1.0, 3.5)[1].sum()
        for wave in limit - np.linspace(2.5, 97.5, 20)
    ]
    assert np.mean(depths) == pytest.approx(0.25, abs=0.05)
    assert 1.0 / np.mean(np.exp(-np.array(depths))) == pytest.approx(1.3, abs=0.1)


@pytest.mark.parametrize("definition", ["local", "unit_depth"])
def test_free_path_falls_as_the_fifth_power(definition):
    slope = np.log(free_path(4.5, definition) / free_path(3.0, definition)) / np.log(5.5 / 4.0)
    assert -6.0 < slope < -4.5


def test_damped_systems():
    assert photoionization_cross_section(1.0) * 2e20 > 1000.0
    assert np.log10(2e20) == pytest.approx(20.3, abs=0.005)
    # Slopes: about -2 below a few 10^21, -3 or steeper above.
    slope = np.diff(DLA.log_g([20.95, 21.05, 21.55, 21.65]))[[0, 2]] / 0.1
    assert slope[0] == pytest.approx(-2.0, abs=0.3)
    assert slope[1] < -3.0


def test_damped_systems_dominate_the_mass():
    def density(z, low):
        return predict("hi_density", z, form="omega_hi", log_nhi_min=low)

    for z in (2.5, 4.0):
        assert 0.8 < density(z, 20.3) / density(z, 12.0) < 0.9
    assert 1.0 < density(4.0, 20.3) / density(2.5, 20.3) < 2.0
