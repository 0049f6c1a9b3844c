"""Errors of differences between analyses that share data: closed forms of the linear case."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fogline.derived import Draws
from fogline.headlines import headline_draws
from fogline.response import build_response
from fogline.response_file import Fit
from fogline.trust.differences import Influence, difference_sigma, influence_of
from fogline.trust.information import information_at
from small_study import ANALYSIS, PRIOR, SETTING, THETA, empty_datasets

RNG = np.random.default_rng(1)
JACOBIAN = RNG.standard_normal((9, 3))
"""Rows with unit errors, as linear functions of three coordinates with a unit-normal prior."""

GRADIENT = np.array([1.0, -0.5, 2.0])
QUANTITY = ("q", 2.5)


def covariance(rows):
    return np.linalg.inv(np.eye(3) + JACOBIAN[rows].T @ JACOBIAN[rows])


def linear(rows, prior="same"):
    """Influence of an analysis of some rows, in closed form."""
    c = covariance(rows)
    k = {("data", str(i)): np.array([GRADIENT @ c @ JACOBIAN[i]]) for i in rows}
    k |= {("prior", str(j), prior): np.array([(GRADIENT @ c)[j]]) for j in range(3)}
    sigma = np.array([np.sqrt(GRADIENT @ c @ GRADIENT)])
    return Influence((QUANTITY,), sigma, k, dict.fromkeys(k, 1.0), np.zeros(1))


def estimates(rows, data, prior_means):
    """Posterior means of many simulated data sets, shape (n,)."""
    c = covariance(rows)
    return (data[:, rows] @ JACOBIAN[rows] + prior_means) @ c @ GRADIENT


def test_influence_adds_up_to_the_variance():
    found = linear([0, 1, 2, 5])
    assert_allclose(found.linear_sigma, found.sigma)


def test_nested_analyses_differ_by_the_difference_of_variances():
    every, some = linear(range(9)), linear(range(5))
    found = difference_sigma(every, some)[QUANTITY]
    assert found == pytest.approx(np.sqrt(some.sigma[0] ** 2 - every.sigma[0] ** 2), rel=1e-10)
    # Not in quadrature: the shift would look far too small.
    assert found < 0.8 * np.hypot(some.sigma[0], every.sigma[0])
    assert difference_sigma(some, every)[QUANTITY] == pytest.approx(found)


@pytest.mark.parametrize(
    ("first", "second"), [([0, 1, 2, 3], [4, 5, 6, 7, 8]), ([0, 1, 2, 3, 4, 5], [3, 4, 5, 6, 7])]
)
def test_the_scatter_of_simulated_differences(first, second):
    """Truths from the prior, noise in every row: the estimates differ by as much as is said."""
    n = 40_000
    truth = RNG.standard_normal((n, 3))
    data = truth @ JACOBIAN.T + RNG.standard_normal((n, 9))
    # A prior mean is a datum as well; both analyses have the same one, at zero.
    means = np.zeros((n, 3))
    simulated = estimates(first, data, means) - estimates(second, data, means)
    found = difference_sigma(linear(first), linear(second))[QUANTITY]
    assert simulated.std() == pytest.approx(found, rel=0.02)


def test_priors_that_differ_count_for_each():
    found = difference_sigma(linear([0, 1]), linear([0, 1], prior="other"))[QUANTITY]
    c = covariance([0, 1])
    assert found == pytest.approx(np.sqrt(2.0 * GRADIENT @ c @ c @ GRADIENT), rel=1e-10)


def test_the_same_analysis_has_no_error_of_the_difference():
    assert np.isnan(difference_sigma(linear([0, 1]), linear([0, 1]))[QUANTITY])
    elsewhere = dataclasses.replace(linear([0, 1]), quantities=(("other", 2.5),))
    assert difference_sigma(linear([0, 1]), elsewhere) == {}


# Draws of a real response


def fit_of(names):
    """A fit of some data sets of the small study, with data where the model is."""
    datasets = [data for data in empty_datasets() if data.name in names]
    response = build_response(datasets, SETTING)
    filled = [
        dataclasses.replace(
            data,
            observed=response.predict(THETA)[rows],
            err_lo=0.05 * response.predict(THETA)[rows],
            err_hi=0.05 * response.predict(THETA)[rows],
        )
        for data, rows in zip(datasets, response.slices, strict=True)
    ]
    return Fit(ANALYSIS, build_response(filled, SETTING), {"inputs": {}})


def drawn(fit, n=20_000, shrink=0.05):
    """Influence from draws of the normal posterior, narrowed so that everything is linear."""
    from scipy.optimize import least_squares

    x0 = least_squares(
        lambda x: PRIOR.to_parameters(x[None])[0] - THETA, np.zeros(PRIOR.n_dim), xtol=1e-12
    ).x
    c = information_at(fit.posterior, x0).covariance
    noise = np.random.default_rng(2).standard_normal((n, len(x0))) @ np.linalg.cholesky(c).T
    x = x0 + shrink * noise
    theta = PRIOR.to_parameters(x)
    headlines = headline_draws(Draws(theta, SETTING, ANALYSIS.derive))
    found = influence_of(fit, x, theta, headlines)
    # Covariances of narrowed draws are smaller by the square, errors by the factor.
    rows = {key: k / shrink**2 for key, k in found.rows.items()}
    return dataclasses.replace(
        found, rows=rows, sigma=found.sigma / shrink, noise=found.noise / shrink**2
    )


def test_influence_from_draws_adds_up_and_nested_fits_differ_as_they_must():
    every = ("lya", "lls", "local", "dla", "density")
    whole, part = drawn(fit_of(every)), drawn(fit_of(every[:-1]))
    # Sums of noisy squares: what the noise adds is known and taken off.
    assert_allclose(np.sqrt(whole.linear_sigma**2 - whole.noise), whole.sigma, rtol=0.05)
    found = difference_sigma(whole, part)
    names = list(whole.quantities)
    at = next(i for i, (name, _) in enumerate(names) if name == "rho_hi")
    expected = np.sqrt(part.sigma[at] ** 2 - whole.sigma[at] ** 2)
    assert found[names[at]] == pytest.approx(expected, rel=0.1)
    # The density says nothing of the forest.
    assert np.isnan(found[next(name for name in names if name[0] == "tau_eff")])
