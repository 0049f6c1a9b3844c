"""The prior: its map from a unit normal against scipy's distributions."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from fogline.priors import Prior, cut_quantile, unit_normal_map
from small_study import MODEL, PIVOTS

N_DRAWS = 20_000
ANCHOR = PIVOTS.index(20.3)
WIDTHS = np.diff(PIVOTS)


def changed(**spline_prior):
    return Prior(dataclasses.replace(MODEL, prior=dataclasses.replace(MODEL.prior, **spline_prior)))


def draw(prior, seed=11, n=N_DRAWS):
    return prior.to_parameters(np.random.default_rng(seed).standard_normal((n, prior.n_dim)))


def slopes_of(theta):
    return -np.diff(theta[:, : len(PIVOTS)], axis=1) / WIDTHS


def agrees(sample, distribution):
    return stats.kstest(sample, distribution.cdf).pvalue > 1e-3


SPECS = [
    {"dist": "norm", "loc": -21.5, "scale": 1.0},
    {"dist": "uniform", "loc": -23.0, "scale": 3.0},
    {"dist": "t", "df": 3, "loc": -21.5, "scale": 0.5},
    {"dist": "truncnorm", "a": -1.0, "b": 2.0, "loc": -21.5, "scale": 0.5},
    {"dist": "expon", "loc": 0.2, "scale": 1.3},
]


def scipy_of(spec):
    arguments = {key: value for key, value in spec.items() if key != "dist"}
    return getattr(stats, spec["dist"])(**arguments)


@pytest.mark.parametrize("spec", SPECS, ids=lambda spec: spec["dist"])
def test_map_of_a_unit_normal(spec):
    x = np.random.default_rng(5).standard_normal(N_DRAWS)
    values = unit_normal_map(spec)(x)
    assert agrees(values, scipy_of(spec))
    assert np.all(np.diff(unit_normal_map(spec)(np.linspace(-5.0, 5.0, 101))) > 0.0)
    # A control: the same numbers do not pass for a distribution a tenth of σ away.
    assert not agrees(values + 0.1 * scipy_of(spec).std(), scipy_of(spec))


def test_map_keeps_its_digits_in_both_tails():
    heavy = unit_normal_map({"dist": "t", "df": 3, "loc": 0.0, "scale": 1.0})
    values = heavy(np.array([-12.0, -9.0, 9.0, 12.0]))
    assert np.all(np.isfinite(values))
    assert_allclose(values, -values[::-1], rtol=1e-9)


@pytest.mark.parametrize("spec", SPECS, ids=lambda spec: spec["dist"])
def test_cut_quantile_is_the_distribution_above_the_floor(spec):
    distribution = scipy_of(spec)
    floor = float(distribution.ppf(0.3))
    x = np.random.default_rng(6).standard_normal(N_DRAWS)
    values = cut_quantile(spec)(x, np.full(N_DRAWS, floor))
    assert values.min() >= floor
    shifted = (distribution.cdf(values) - 0.3) / 0.7
    assert stats.kstest(shifted, "uniform").pvalue > 1e-3


def test_anchor_and_exponents_have_their_own_priors():
    theta = draw(Prior(MODEL))
    assert agrees(theta[:, ANCHOR], stats.norm(-21.5, 1.0))
    for column in (-3, -2, -1):
        assert agrees(theta[:, column], stats.norm(1.5, 1.5))
    # Independent of one another.
    correlation = np.corrcoef(theta[:, [ANCHOR, -3, -2, -1]].T) - np.eye(4)
    assert np.abs(correlation).max() < 4.0 / np.sqrt(N_DRAWS)


def test_f_falls_with_column_in_every_draw():
    for prior in (Prior(MODEL), changed(slope_kind="independent", slope_step=None)):
        theta = draw(prior)
        assert np.all(np.diff(theta[:, : len(PIVOTS)], axis=1) < 0.0)
    # Even of a walk that would often go the other way.
    wild = changed(
        first_slope={"dist": "norm", "loc": -1.0, "scale": 1.0},
        slope_step={"dist": "norm", "loc": -1.0, "scale": 0.5},
    )
    assert np.all(np.diff(draw(wild)[:, : len(PIVOTS)], axis=1) <= 0.0)


def test_first_slope_is_next_to_the_anchor_and_the_walk_goes_both_ways():
    slopes = slopes_of(draw(Prior(MODEL)))
    first = stats.truncnorm(-1.7 / 0.5, np.inf, loc=1.7, scale=0.5)
    assert agrees(slopes[:, ANCHOR - 1], first)
    # Steps away from it: narrow at first, then as √n, on either side alike.
    spread = slopes.std(axis=0)
    assert np.all(np.diff(spread[: ANCHOR - 1]) < 0.0)
    assert np.all(np.diff(spread[ANCHOR - 1 :]) > 0.0)
    above = slopes[:, ANCHOR] - slopes[:, ANCHOR - 1]
    below = slopes[:, ANCHOR - 2] - slopes[:, ANCHOR - 1]
    assert stats.ks_2samp(above, below).pvalue > 1e-3
    # Where the floor is far away, a step is the plain normal.
    far = slopes[:, ANCHOR - 1] > 2.0
    assert stats.kstest(above[far], stats.norm(0.0, 0.5).cdf).pvalue > 1e-3


@pytest.mark.parametrize("anchor", [12.0, 15.0, 22.5])
def test_any_pivot_may_be_the_anchor(anchor):
    theta = draw(changed(anchor_log_nhi=anchor))
    assert agrees(theta[:, PIVOTS.index(anchor)], stats.norm(-21.5, 1.0))
    assert np.all(np.diff(theta[:, : len(PIVOTS)], axis=1) < 0.0)


def test_independent_slopes_share_one_prior():
    spec = {"dist": "truncnorm", "a": -2.0, "b": 2.0, "loc": 1.7, "scale": 0.8}
    slopes = slopes_of(draw(changed(slope_kind="independent", first_slope=spec, slope_step=None)))
    for column in range(slopes.shape[1]):
        assert agrees(slopes[:, column], scipy_of(spec | {"a": -2.0}))
    correlation = np.corrcoef(slopes.T) - np.eye(9)
    assert np.abs(correlation).max() < 4.5 / np.sqrt(N_DRAWS)


def test_steps_of_heavy_tails():
    prior = changed(slope_step={"dist": "t", "df": 3, "loc": 0.0, "scale": 0.3})
    theta = draw(prior)
    assert np.all(np.isfinite(theta))
    assert np.all(np.diff(theta[:, : len(PIVOTS)], axis=1) <= 0.0)


def test_extreme_coordinates_give_finite_parameters():
    prior = Prior(MODEL)
    for size in (8.0, 20.0, 35.0, 60.0, 1e6):
        for sign in (1.0, -1.0):
            theta = prior.to_parameters(np.full((1, 13), sign * size))
            assert np.all(np.isfinite(theta)), (size, sign)


def test_density_is_that_of_a_unit_normal():
    prior = Prior(MODEL)
    x = np.random.default_rng(2).normal(size=(6, 13))
    expected = stats.norm.logpdf(x).sum(axis=1)
    assert_allclose(prior.ln_density(x), expected, rtol=1e-12)


def test_coordinates_have_names_in_order():
    names = Prior(MODEL).coordinate_names
    assert len(names) == Prior(MODEL).n_dim == 13
    assert names[:2] == ("anchor[20.3]", "slope[12.0-13.5]")
    assert names[-1] == "evolution[20.3]"
