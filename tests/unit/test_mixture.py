"""Student-t mixture: density against scipy, draws against their moments, robustness of the fit."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import logsumexp
from scipy.stats import multivariate_t

from fogline.mixture import StudentMixture
from fogline.mixture_fit import fit_student_mixture


def two_components() -> StudentMixture:
    factors = np.array([[[1.0, 0.0, 0.0], [0.5, 0.3, 0.0], [-0.2, 0.1, 2.0]], 0.1 * np.eye(3)])
    means = np.array([[0.0, 1.0, -2.0], [4.0, 4.0, 4.0]])
    return StudentMixture(np.array([0.7, 0.3]), means, factors, dof=8.0)


def test_density_is_scipys_weighted_sum():
    mixture = two_components()
    x = np.random.default_rng(1).normal(scale=4.0, size=(50, 3))
    parts = [
        np.log(w) + multivariate_t(mean, factor @ factor.T, df=8.0).logpdf(x)
        for w, mean, factor in zip(mixture.weights, mixture.means, mixture.factors, strict=True)
    ]
    # Double precision of terms up to about 100.
    assert_allclose(mixture.ln_density(x), logsumexp(parts, axis=0), rtol=1e-12)


@pytest.mark.parametrize("rng", [np.random.default_rng(2), np.random.RandomState(2)])
def test_draws_have_the_mixtures_moments(rng):
    mixture, n = two_components(), 40_000
    x = mixture.draw(n, rng)
    covariance = [8.0 / 6.0 * f @ f.T for f in mixture.factors]  # dof / (dof - 2) times the scale
    mean = mixture.weights @ mixture.means
    second = sum(
        w * (c + np.outer(m, m))
        for w, c, m in zip(mixture.weights, covariance, mixture.means, strict=True)
    )
    sd = np.sqrt(np.diag(second) - mean**2)
    # Means: five standard errors. Widths: a variance has the relative error
    # sqrt((kurtosis - 1) / n), kurtosis 4.5 for this t; half of it for the width.
    assert_allclose(x.mean(axis=0), mean, atol=5.0 * sd.max() / np.sqrt(n))
    assert_allclose(x.std(axis=0), sd, rtol=5.0 * 0.5 * np.sqrt(3.5 / n))


def test_fit_recovers_the_density_it_is_given():
    truth = two_components()
    x = truth.draw(20_000, np.random.default_rng(3))
    fit = fit_student_mixture(x, 2, np.random.default_rng(4), pooled_weight=0.0)
    fresh = truth.draw(4_000, np.random.default_rng(5))
    excess = truth.ln_density(fresh) - fit.ln_density(fresh)
    # The mean is the Kullback-Leibler divergence: about half the number of fitted numbers over
    # the number of samples, 19 / 40 000; its own scatter is the same order.
    assert abs(excess.mean()) < 0.005


def test_fit_depends_on_its_generator_alone():
    x = np.random.default_rng(6).normal(size=(2_000, 4))
    fits = [fit_student_mixture(x, 4, np.random.default_rng(seed)) for seed in (7, 7, 8)]
    assert np.array_equal(fits[0].means, fits[1].means)
    assert np.array_equal(fits[0].factors, fits[1].factors)
    assert not np.array_equal(fits[0].means, fits[2].means)


def test_stuck_outlying_walkers_do_not_spoil_the_fit():
    rng = np.random.default_rng(9)
    clean = rng.normal(size=(8_000, 6))
    stuck = np.repeat(rng.normal(loc=40.0, scale=5.0, size=(3, 6)), 40, axis=0)
    fit = fit_student_mixture(np.concatenate([clean, stuck]), 6, rng)
    fresh = rng.normal(size=(4_000, 6))
    entropy = 0.5 * 6 * np.log(2 * np.pi * np.e)  # of the unit normal: the best mean ln density
    assert fit.ln_density(fresh).mean() > -entropy - 0.2


def test_samples_that_never_moved_give_a_finite_density():
    x = np.repeat(np.random.default_rng(10).normal(size=(1, 3)), 100, axis=0)
    fit = fit_student_mixture(x, 4, np.random.default_rng(11))
    assert np.isfinite(fit.ln_density(x)).all()


def test_components_without_samples_are_dropped():
    x = np.random.default_rng(12).normal(size=(60, 5))
    fit = fit_student_mixture(x, 32, np.random.default_rng(13))
    assert 1 <= fit.n_components <= 60 // 6
    assert_allclose(fit.weights.sum(), 1.0, rtol=1e-12)


def test_too_few_samples_are_refused():
    with pytest.raises(ValueError, match="needs 8 finite samples or more, got 7"):
        fit_student_mixture(np.zeros((7, 3)), 2, np.random.default_rng(14))


def test_samples_that_are_not_finite_are_refused():
    with pytest.raises(ValueError, match="finite samples"):
        fit_student_mixture(np.full((50, 3), np.inf), 2, np.random.default_rng(15))
