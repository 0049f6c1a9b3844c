"""Likelihoods against scipy.stats, and normalised as densities of the data."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats
from scipy.integrate import quad

from fogline.datasets import hypothetical
from fogline.likelihood import Likelihood

PREDICTED = np.array([[0.7, 2.0, 3.4], [1.0, 1.9, 9.0]])


def data_set(observed, err_lo=None, err_hi=None, *, limit=0, counts=False, **meta):
    observed = np.array(observed, dtype=float)
    data = hypothetical("lls_incidence", np.full(len(observed), 2.5), **meta)
    silent = np.full(len(observed), np.nan)
    return dataclasses.replace(
        data,
        observed=observed,
        err_lo=silent if err_lo is None else np.array(err_lo, dtype=float),
        err_hi=silent if err_hi is None else np.array(err_hi, dtype=float),
        limit=np.full(len(observed), limit),
        counts=counts,
        search_path=np.ones(len(observed)) if counts else silent,
    )


def rows(data, predicted=PREDICTED):
    return Likelihood.from_datasets([data]).ln_rows(np.array(predicted, dtype=float))


def test_equal_errors_are_a_normal():
    data = data_set([1.0, 2.0, 3.0], [0.3, 0.2, 0.5], [0.3, 0.2, 0.5])
    expected = stats.norm([1.0, 2.0, 3.0], [0.3, 0.2, 0.5]).logpdf(PREDICTED)
    assert_allclose(rows(data), expected, rtol=1e-13)


@pytest.mark.parametrize("likelihood", ["split_normal", "lognormal"])
def test_the_side_of_the_prediction_chooses_the_error(likelihood):
    # Above the datum the upper error counts: 3 ± (0.1 below, 1 above).
    data = data_set([3.0], [0.1], [1.0], likelihood=likelihood)
    above, at, below = rows(data, [[3.5], [3.0], [2.5]])[:, 0]
    assert at > above > below
    space = np.log if likelihood == "lognormal" else np.asarray
    scale = 3.0 if likelihood == "lognormal" else 1.0
    assert above - at == pytest.approx(-0.5 * ((space(3.5) - space(3.0)) * scale / 1.0) ** 2)
    assert below - at == pytest.approx(-0.5 * ((space(2.5) - space(3.0)) * scale / 0.1) ** 2)


def test_lognormal_is_that_of_scipy():
    data = data_set([1.5], [0.3], [0.3], likelihood="lognormal")
    for predicted in (0.9, 1.5, 2.2):
        expected = stats.lognorm(s=0.2, scale=predicted).logpdf(1.5)
        assert rows(data, [[predicted]])[0, 0] == pytest.approx(expected, rel=1e-12)


def test_split_normal_is_normalised_in_the_data():
    # The errors belong to the row; the density of other values that it might have had is 1 in all.
    def density(y):
        return np.exp(rows(data_set([y], [0.2], [0.6]), [[2.0]])[0, 0])

    total = quad(density, -3.0, 2.0)[0] + quad(density, 2.0, 7.0)[0]
    assert total == pytest.approx(1.0, rel=1e-8)


def test_lognormal_is_normalised_in_the_data():
    # σ of ln y is err / value: errors that go with the value keep it.
    def density(y):
        return np.exp(rows(data_set([y], [0.2 * y], [0.3 * y], likelihood="lognormal"), [[2.0]]))[
            0, 0
        ]

    total = quad(density, 0.2, 2.0)[0] + quad(density, 2.0, 15.0)[0]
    assert total == pytest.approx(1.0, rel=1e-7)


def test_counts_are_poisson():
    data = data_set([0, 3, 12], counts=True)
    assert_allclose(rows(data), stats.poisson(PREDICTED).logpmf([0, 3, 12]), rtol=1e-12)
    probabilities = [np.exp(rows(data_set([n], counts=True), [[4.2]])[0, 0]) for n in range(60)]
    assert np.sum(probabilities) == pytest.approx(1.0, rel=1e-12)


def test_lognormal_in_meta_does_not_touch_counts():
    data = data_set([3], counts=True, likelihood="lognormal")
    assert rows(data, [[4.2]])[0, 0] == pytest.approx(stats.poisson(4.2).logpmf(3), rel=1e-12)


@pytest.mark.parametrize("confidence", [0.683, 0.95, 0.997])
@pytest.mark.parametrize("sign", [1, -1])
@pytest.mark.parametrize("error", [None, [0.4]])
@pytest.mark.parametrize("likelihood", ["split_normal", "lognormal"])
def test_at_the_limit_the_probability_is_one_minus_its_confidence(
    confidence, sign, error, likelihood
):
    data = data_set([2.0], error, error, limit=sign, confidence=confidence, likelihood=likelihood)
    assert np.exp(rows(data, [[2.0]])[0, 0]) == pytest.approx(1.0 - confidence, rel=1e-10)


@pytest.mark.parametrize("sign", [1, -1])
def test_limits_favour_their_own_side(sign):
    data = data_set([2.0], [0.4], [0.4], limit=sign, confidence=0.95)
    far, near, wrong = rows(data, [[2.0 - 1.9 * sign], [2.0 - 0.5 * sign], [2.0 + sign]])[:, 0]
    # Well inside a limit says nothing more; it is no datum at the limit.
    assert 0.0 >= far > near > wrong
    assert far == pytest.approx(0.0, abs=2e-3)
    # Against the row's own normal: P(y beyond L ∓ z σ | m).
    made = 2.0 - sign * stats.norm.ppf(0.95) * 0.4
    expected = stats.norm(2.0 + sign, 0.4)
    probability = expected.logcdf(made) if sign > 0 else expected.logsf(made)
    assert wrong == pytest.approx(probability, rel=1e-10)


def test_upper_limit_without_error_is_a_measurement_of_zero():
    data = data_set([2.0], limit=1, confidence=0.95)
    sigma = 2.0 / stats.norm.ppf(0.95)
    expected = stats.norm(0.9, sigma).logcdf(0.0)
    assert rows(data, [[0.9]])[0, 0] == pytest.approx(expected, rel=1e-10)


def test_infinite_predictions():
    # A free path beyond reach fits a lower limit perfectly, and a measurement not at all.
    lower = data_set([200.0], [20.0], [20.0], limit=-1, confidence=0.95)
    measured = data_set([200.0], [20.0], [20.0])
    assert rows(lower, [[np.inf]])[0, 0] == 0.0
    assert rows(measured, [[np.inf]])[0, 0] == -np.inf


def mixed():
    return [
        data_set([1.0, 2.0], [0.3, 0.2], [0.4, 0.2]),
        data_set([5.0], counts=True),
        data_set([4.0], [1.0], [1.0], limit=-1, confidence=0.9),
        data_set([6.0], [1.0], [2.0], likelihood="lognormal"),
    ]


def test_total_is_the_sum_of_rows_in_order():
    predicted = np.array([[1.1, 1.8, 4.0, 4.4, 5.0], [0.8, 2.1, 7.0, 3.0, 8.0]])
    likelihood = Likelihood.from_datasets(mixed())
    each = np.concatenate(
        [
            rows(data, predicted[:, part])
            for data, part in zip(
                mixed(), (slice(0, 2), slice(2, 3), slice(3, 4), slice(4, 5)), strict=True
            )
        ],
        axis=1,
    )
    assert_allclose(likelihood.ln_rows(predicted), each, rtol=1e-13)
    assert_allclose(likelihood.ln_total(predicted), each.sum(axis=1), rtol=1e-13)


def test_pulls_keep_their_sign():
    likelihood = Likelihood.from_datasets([data_set([1.0, 1.0], [0.1, 0.1], [0.4, 0.4])])
    pulls = likelihood.standardize(likelihood.observed, np.array([[0.8, 1.8]]))
    # Observed above the prediction is positive; a prediction above the datum takes err_hi.
    assert_allclose(pulls, [[2.0, -2.0]], rtol=1e-12)
    counted = Likelihood.from_datasets([data_set([16.0], counts=True)])
    assert_allclose(counted.standardize(counted.observed, np.array([[25.0]])), [[-1.8]])


@pytest.mark.parametrize("likelihood", ["split_normal", "lognormal"])
def test_replicates_follow_the_density(likelihood):
    # The density of a replicate about its prediction has the row's errors on the opposite sides.
    data = data_set([2.0], [0.2], [0.6], likelihood=likelihood)
    model = Likelihood.from_datasets([data])
    drawn = model.replicate(np.full((40_000, 1), 2.0), np.random.default_rng(8))[:, 0]
    centre = np.log(2.0) if likelihood == "lognormal" else 2.0
    lo, hi = (0.1, 0.3) if likelihood == "lognormal" else (0.2, 0.6)

    def cdf(y):
        below = stats.norm(centre, hi).cdf(np.minimum(y, centre)) * 2.0 * hi / (lo + hi)
        above = (stats.norm(centre, lo).cdf(np.maximum(y, centre)) - 0.5) * 2.0 * lo / (lo + hi)
        return below + above

    assert stats.kstest(drawn, cdf).pvalue > 1e-3
    # The control: with the sides exchanged it would not pass.
    assert stats.kstest(2.0 * centre - drawn, cdf).pvalue < 1e-6
    assert_allclose(
        model.in_data_space(model.in_file_space(drawn[:, None])), drawn[:, None], atol=1e-12
    )


def test_replicated_counts_are_poisson():
    model = Likelihood.from_datasets([data_set([3.0], counts=True)])
    drawn = model.replicate(np.full((20_000, 1), 3.3), np.random.default_rng(9))[:, 0]
    # Standard errors: √(3.3/20000) = 0.013 of the mean, 0.036 of the variance.
    assert drawn.mean() == pytest.approx(3.3, abs=0.06)
    assert drawn.var() == pytest.approx(3.3, abs=0.16)
    assert np.all(drawn == np.round(drawn))


# Student-t, covariance, scatter, scale


def test_student_rows_are_scipys_t():
    data = data_set([1.0, 2.0, 3.0], [0.3] * 3, [0.3] * 3, student_dof=4)
    expected = stats.t(4, [1.0, 2.0, 3.0], 0.3).logpdf(PREDICTED)
    assert_allclose(rows(data), expected, rtol=1e-12)


def test_student_limits_are_scipys_t():
    data = data_set([2.0], [0.4], [0.4], limit=1, confidence=0.95, student_dof=3)
    made = 2.0 - stats.norm.ppf(0.95) * 0.4
    expected = stats.t(3, 2.6, 0.4).logcdf(made)
    assert rows(data, [[2.6]])[0, 0] == pytest.approx(expected, rel=1e-10)


COVARIANCE = np.array([[0.09, 0.03, 0.0], [0.03, 0.04, -0.02], [0.0, -0.02, 0.25]])


def correlated(**meta):
    sigma = np.sqrt(np.diag(COVARIANCE))
    data = data_set([1.0, 2.0, 3.0], sigma, sigma, **meta)
    return dataclasses.replace(data, covariance=COVARIANCE)


def test_covariance_is_scipys_multivariate_normal():
    expected = stats.multivariate_normal([1.0, 2.0, 3.0], COVARIANCE).logpdf(PREDICTED)
    assert_allclose(rows(correlated()).sum(axis=1), expected, rtol=1e-12)
    # The control: without its off-diagonal it is another number.
    alone = stats.multivariate_normal([1.0, 2.0, 3.0], np.diag(np.diag(COVARIANCE)))
    assert np.abs(alone.logpdf(PREDICTED) - expected).min() > 0.05


def test_covariance_with_student_tails_is_scipys_multivariate_t():
    expected = stats.multivariate_t([1.0, 2.0, 3.0], COVARIANCE, df=5).logpdf(PREDICTED)
    assert_allclose(rows(correlated(student_dof=5)).sum(axis=1), expected, rtol=1e-12)


def test_lognormal_covariance_is_that_of_the_logarithms():
    data = correlated(likelihood="lognormal")
    scale = np.array([1.0, 2.0, 3.0])
    normal = stats.multivariate_normal(np.log(scale), COVARIANCE / np.outer(scale, scale))
    expected = normal.logpdf(np.log(PREDICTED)) - np.log(scale).sum()
    assert_allclose(rows(data).sum(axis=1), expected, rtol=1e-12)


def test_scatter_is_added_in_quadrature():
    prior = {"dist": "halfnorm", "scale": 0.5}
    loose = np.array([[0.4], [0.0]])
    for data, expected in (
        (
            data_set([1.0, 2.0, 3.0], [0.3] * 3, [0.3] * 3, scatter=prior),
            stats.norm([1.0, 2.0, 3.0], 0.5).logpdf(PREDICTED[0]).sum(),
        ),
        (
            correlated(scatter=prior),
            stats.multivariate_normal([1.0, 2.0, 3.0], COVARIANCE + 0.16 * np.eye(3)).logpdf(
                PREDICTED[0]
            ),
        ),
    ):
        likelihood = Likelihood.from_datasets([data])
        total = likelihood.ln_total(PREDICTED, loose)
        assert total[0] == pytest.approx(expected, rel=1e-12)
        assert total[1] == pytest.approx(likelihood.ln_total(PREDICTED)[1], rel=1e-12)


def test_scatter_touches_its_own_data_set_alone():
    one = data_set([1.0], [0.3], [0.3], scatter={"dist": "halfnorm", "scale": 0.5})
    other = data_set([5.0], counts=True)
    likelihood = Likelihood.from_datasets([other, one])
    predicted = np.array([[4.0, 1.2]])
    each = likelihood.ln_rows(predicted, np.array([[0.4]]))[0]
    assert each[0] == pytest.approx(stats.poisson(4.0).logpmf(5), rel=1e-12)
    assert each[1] == pytest.approx(stats.norm(1.0, 0.5).logpdf(1.2), rel=1e-12)


def test_scale_multiplies_predictions_and_is_added_to_logarithms():
    prior = {"dist": "norm", "loc": 1.0, "scale": 0.1}
    linear = data_set([1.0], [0.3], [0.3], scale=prior)
    dex = dataclasses.replace(data_set([-21.0], [0.1], [0.1], scale=prior), logarithmic=True)
    counts = data_set([7.0], counts=True, scale=prior)
    likelihood = Likelihood.from_datasets([linear, dex, counts])
    predicted = np.array([[1.2, -21.1, 6.0]])
    scaled = likelihood.scaled(predicted, np.array([[0.9, 1.25, 1.5]]))
    assert_allclose(scaled, [[1.08, -21.1 + np.log10(1.25), 9.0]], rtol=1e-14)
    each = likelihood.ln_rows(predicted, np.array([[0.9, 1.25, 1.5]]))[0]
    assert each[2] == pytest.approx(stats.poisson(9.0).logpmf(7), rel=1e-12)
    assert_allclose(predicted, [[1.2, -21.1, 6.0]])  # the caller's predictions are left alone


def test_replicates_of_correlated_rows_have_their_covariance():
    model = Likelihood.from_datasets([correlated()])
    drawn = model.replicate(np.tile([1.0, 2.0, 3.0], (60_000, 1)), np.random.default_rng(4))
    # Standard errors of a covariance are below 0.25 √(2/60000) = 0.0015.
    assert_allclose(np.cov(drawn.T), COVARIANCE, atol=0.006)
    whitened = model.standardize(drawn, np.array([[1.0, 2.0, 3.0]]).repeat(len(drawn), axis=0))
    assert_allclose(np.cov(whitened.T), np.eye(3), atol=0.03)
