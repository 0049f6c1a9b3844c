"""Single sightlines: their mean is the analytic one, and one kind of absorber has a closed form."""

import dataclasses

import numpy as np
import pytest
from scipy import stats

from fogline.atomic import LYMAN_LIMIT, SIGMA_912
from fogline.filters import LYMAN_CONTINUUM, Filter
from fogline.sightlines import Passband
from small_study import SETTING, THETA

N_DRAWS, PER_DRAW = 60, 60


def drawn(band, theta=THETA, seed=5, **changes):
    many = np.tile(theta, (N_DRAWS, 1))
    return band.draw(many, PER_DRAW, np.random.default_rng(seed))


@pytest.mark.parametrize("z", [2.6, 3.5, 4.4])
def test_mean_over_sightlines_is_the_analytic_one(z):
    band = Passband(LYMAN_CONTINUUM, z, SETTING)
    single, mean = drawn(band), band.mean(THETA[None])[0]
    error = single.std() / np.sqrt(len(single))
    # The chance of 4 errors is 6e-5; cells of the drawn intensity are good to 0.5%.
    assert abs(single.mean() - mean) < 4.0 * error + 0.005 * mean
    # The control: a tenth more absorbers would be seen.
    more = THETA.copy()
    more[:10] += np.log10(1.4)
    assert abs(single.mean() - band.mean(more[None])[0]) > 6.0 * error


def test_scatter_is_wider_than_any_error_of_the_mean():
    # For one galaxy at z ≈ 3 the scatter between sightlines exceeds the uncertainty of the mean
    # (common practice).
    single = drawn(Passband(LYMAN_CONTINUUM, 3.0, SETTING))
    lo, hi = np.quantile(single, [0.16, 0.84])
    assert hi - lo > 0.1
    assert single.min() < 0.05
    assert single.max() < 1.0


def test_thick_absorbers_alone_close_sightlines_as_a_poisson_number_says():
    """Columns of 10^19 and more alone: each absorber is black below its limit, or far from it."""
    distribution = dataclasses.replace(
        SETTING.distribution, pivots=(19.0, 19.5, 20.0), evolution_pivots=(19.5,)
    )
    setting = dataclasses.replace(SETTING, distribution=distribution)
    theta = np.array([-20.0, -20.8, -21.6, 0.0])
    # A narrow filter just below the limit of z = 3: the path is from z_near to 3.
    rest = np.array([850.0, 851.0])
    band = Passband(Filter("x", rest, np.ones(2), rest=True), 3.0, setting)
    single = drawn(band, theta)
    z_near = 850.0 / LYMAN_LIMIT * 4.0 - 1.0
    z = np.linspace(z_near, 3.0, 201)
    log_nhi = np.linspace(19.0, 20.0, 2001)
    per_x = np.trapezoid(
        10.0 ** distribution.log_f(theta, log_nhi, 2.5) * np.log(10.0) * 10.0**log_nhi, log_nhi
    )
    number = per_x * np.trapezoid(setting.cosmology.dx_dz(z), z)
    n_open = int((single > 0.5 * single.max()).sum())
    assert 10.0**19.0 * SIGMA_912 > 60.0
    # τ_912 = 63 at least, and still 50 at the end of the path: nothing in between 0 and 1.
    expected = stats.binom(len(single), np.exp(-number))
    assert 1e-4 < expected.cdf(n_open) < 1.0 - 1e-4
    assert not 1e-4 < stats.binom(len(single), np.exp(-1.5 * number)).cdf(n_open) < 1.0 - 1e-4


def test_redward_of_lyman_alpha_nothing_absorbs():
    band = Passband(Filter("r", np.array([1400.0, 1420.0]), np.ones(2), rest=True), 3.0, SETTING)
    assert drawn(band) == pytest.approx(1.0, rel=1e-12)


def test_lines_scatter_above_the_limit():
    # Between the limit and Lyβ only lines absorb: their mean is the analytic one, and strong ones
    # make sightlines differ.
    band = Passband(Filter("r", np.array([940.0, 1000.0]), np.ones(2), rest=True), 3.0, SETTING)
    single, mean = drawn(band), band.mean(THETA[None])[0]
    error = single.std() / np.sqrt(len(single))
    assert abs(single.mean() - mean) < 4.0 * error + 0.005 * mean
    assert 0.005 < single.std() < 0.15


def test_the_same_seed_gives_the_same_sightlines():
    band = Passband(LYMAN_CONTINUUM, 3.0, SETTING)
    assert np.array_equal(drawn(band), drawn(band))
    assert not np.array_equal(drawn(band), drawn(band, seed=6))
