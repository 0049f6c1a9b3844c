"""Posterior: prior times likelihood; −inf is allowed, NaN is a bug that says where it was made."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from fogline.posterior import Posterior
from fogline.response import build_response
from small_study import PRIOR, SETTING, THETA, empty_datasets


def posterior_of(datasets):
    return Posterior.of(build_response(datasets, SETTING), PRIOR)


def truth_as_data():
    """Data sets whose values are the truth's own predictions, with errors of 10%."""
    response = build_response(empty_datasets(), SETTING)
    predicted = response.predict(THETA)
    return [
        dataclasses.replace(
            data,
            observed=np.round(predicted[rows]) if data.counts else predicted[rows],
            err_lo=np.abs(0.1 * predicted[rows]),
            err_hi=np.abs(0.1 * predicted[rows]),
        )
        for data, rows in zip(response.datasets, response.slices, strict=True)
    ]


POSTERIOR = posterior_of(truth_as_data())


def test_posterior_is_prior_times_likelihood():
    x = np.random.default_rng(1).normal(size=(5, 13))
    expected = stats.norm.logpdf(x).sum(axis=1)
    expected += POSTERIOR.ln_likelihood(PRIOR.to_parameters(x))
    # Sampling runs in single precision about a reference (tests/unit/test_walkers.py).
    assert_allclose(POSTERIOR.ln_prob(x), expected, rtol=2e-5)


def test_the_truth_is_the_most_likely():
    moved = THETA + 0.05 * np.random.default_rng(2).standard_normal((50, 13))
    at_truth = POSTERIOR.ln_likelihood(THETA[None])[0]
    # Counts were rounded, which may leave a little to gain.
    assert np.all(POSTERIOR.ln_likelihood(moved) < at_truth + 0.5)
    assert np.median(POSTERIOR.ln_likelihood(moved)) < at_truth - 0.5


def test_likelihood_of_one_row_written_out():
    data = truth_as_data()[1]  # LLS incidences
    posterior = posterior_of([data])
    predicted = build_response([data], SETTING).predict(THETA + 0.02)
    expected = stats.norm(data.observed, data.err_lo).logpdf(predicted).sum()
    assert posterior.ln_likelihood(THETA[None] + 0.02)[0] == pytest.approx(expected, rel=1e-11)


@pytest.mark.parametrize("size", [3.0, 8.0, 15.0, 30.0, 1e3])
def test_extreme_coordinates_are_never_nan(size):
    rng = np.random.default_rng(3)
    x = np.concatenate(
        [size * rng.choice([-1.0, 1.0], size=(300, 13)), size * rng.standard_normal((300, 13))]
    )
    ln_prob = POSTERIOR.ln_prob(x)
    assert not np.isnan(ln_prob).any()
    assert np.all(ln_prob < 1e4)


def test_parameters_beyond_floating_point_are_refused_one_by_one():
    theta = np.tile(THETA, (3, 1))
    theta[1, 0] = 400.0
    ln_likelihood = POSTERIOR.ln_likelihood(theta)
    assert ln_likelihood[1] == -np.inf
    assert ln_likelihood[0] == ln_likelihood[2] > -100.0
    assert POSTERIOR.ln_likelihood(theta[1:2])[0] == -np.inf


def test_beyond_reach_is_refused_by_a_measurement():
    # A free path of 168 Mpc was measured; with ten thousand times fewer absorbers there is none.
    unit_depth = [data for data in truth_as_data() if data.name == "unit_depth"]
    posterior = posterior_of(unit_depth)
    thin = THETA - np.array([4.0] * 10 + [0.0] * 3)
    assert posterior.ln_likelihood(thin[None])[0] == -np.inf


@pytest.mark.parametrize("column", [3, 11])
def test_nan_raises_with_the_parameters_that_made_it(column):
    theta = np.tile(THETA, (4, 1))
    theta[2, column] = np.nan
    with pytest.raises(FloatingPointError, match=r"NaN at the parameters \[-9.7, .*nan"):
        POSTERIOR.ln_likelihood(theta)


def test_nan_in_the_data_raises_too():
    broken = truth_as_data()
    broken[0] = dataclasses.replace(broken[0], err_lo=np.full(2, np.nan))
    with pytest.raises(FloatingPointError, match=r"NaN at the parameters \[-9.7"):
        posterior_of(broken).ln_likelihood(THETA[None] - 1e-3 * np.arange(13.0))
