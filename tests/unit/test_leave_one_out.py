"""Every row against all the others, where the answer is known by quadrature or in closed form."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from fogline.datasets import hypothetical
from fogline.likelihood import Likelihood
from fogline.response import build_response
from fogline.trust.discrepancies import discrepancies, discrepancy_table, row_level, sigma_of
from fogline.trust.leave_one_out import leave_one_out
from fogline.trust.weights import resampled, smoothed_weights
from small_study import SETTING, THETA, empty_datasets

FOREST = {"form": "tau", "log_nhi_min": 12.0, "log_nhi_max": 17.2}


def depths(z, error=0.1, **changes):
    """Forest depths with values as predicted, and relative errors."""
    data = hypothetical("lya_opacity", z, **FOREST)
    predicted = build_response([data], SETTING).predict(THETA)
    err = error * predicted
    return dataclasses.replace(data, observed=predicted, err_lo=err, err_hi=err, **changes)


def shifted(t):
    """Parameters with every f multiplied by 10^t: all depths grow alike."""
    theta = np.tile(THETA, (len(t), 1))
    theta[:, : len(SETTING.distribution.pivots)] += t[:, None]
    return theta


# Tails and conditional densities


def all_kinds():
    """One data set of every kind of likelihood, 1σ off their predictions."""
    z = np.array([2.2, 2.6, 3.0])
    plain = depths(z)
    off = plain.observed + np.array([0.5, -1.0, 2.0]) * plain.err_lo
    split = dataclasses.replace(plain, observed=off, err_hi=1.7 * plain.err_lo)
    student = dataclasses.replace(split, meta={**split.meta, "student_dof": 4.0})
    limits = dataclasses.replace(split, limit=np.array([1, -1, 1]))
    logged = dataclasses.replace(split, meta={**split.meta, "likelihood": "lognormal"})
    bins = empty_datasets()[4]
    bins = dataclasses.replace(bins, search_path=bins.search_path / 100.0)
    mean = build_response([bins], SETTING).predict(THETA)
    counts = dataclasses.replace(bins, observed=np.array([0.0, *np.ceil(mean[1:])]))
    return [split, student, limits, logged, counts]


def test_tails_are_the_shares_of_replicates():
    datasets = all_kinds()
    likelihood = Likelihood.from_datasets(datasets)
    predicted = np.tile(build_response(datasets, SETTING).predict(THETA), (40_000, 1))
    below, at = likelihood.tails(predicted[:1])
    drawn = likelihood.replicate(predicted, np.random.default_rng(1))
    n = len(drawn)
    for expected, found in (
        (below[0], np.mean(drawn < likelihood.observed, axis=0)),
        (at[0], np.mean(drawn == likelihood.observed, axis=0)),
    ):
        sigma = np.sqrt(np.maximum(expected * (1.0 - expected), 1e-6) / n)
        assert np.all(np.abs(found - expected) < 4.5 * sigma)
    assert at[0, -4:].min() > 0.0  # counts have ties
    assert not at[0, :-4].any()


@pytest.mark.parametrize("dof", [np.inf, 5.0])
def test_a_correlated_row_given_the_others(dof):
    z = np.array([2.2, 2.6, 3.0])
    plain = depths(z)
    covariance = np.outer(plain.err_lo, plain.err_lo) * (0.3 + 0.7 * np.eye(3))
    meta = dict(plain.meta) | ({"student_dof": dof} if np.isfinite(dof) else {})
    observed = plain.observed + np.array([1.0, -0.4, 1.5]) * plain.err_lo
    data = dataclasses.replace(plain, covariance=covariance, meta=meta, observed=observed)
    likelihood = Likelihood.from_datasets([data])
    predicted = plain.observed[None]
    conditional = likelihood.ln_conditional(predicted)[0]
    whole = (
        stats.multivariate_t(plain.observed, covariance, dof)
        if np.isfinite(dof)
        else stats.multivariate_normal(plain.observed, covariance)
    )
    for i in range(3):
        rest = [j for j in range(3) if j != i]
        part = (
            stats.multivariate_t(plain.observed[rest], covariance[np.ix_(rest, rest)], dof)
            if np.isfinite(dof)
            else stats.multivariate_normal(plain.observed[rest], covariance[np.ix_(rest, rest)])
        )
        expected = whole.logpdf(observed) - part.logpdf(observed[rest])
        assert conditional[i] == pytest.approx(expected, rel=1e-10)
        # Its tail, by integrating the same density over the row alone.
        grid = observed[i] - np.linspace(0.0, 40.0, 40_001) * plain.err_lo[i]
        points = np.tile(observed, (len(grid), 1))
        points[:, i] = grid
        density = np.exp(whole.logpdf(points) - part.logpdf(observed[rest]))
        tail = -np.trapezoid(density, grid)
        assert likelihood.tails(predicted)[0][0, i] == pytest.approx(tail, rel=2e-4)


# Leaving rows out


def toy(observed, error=0.1):
    """One free factor on all depths: data, and the grid on which its posterior is exact."""
    data = depths(np.linspace(2.0, 4.0, len(observed)), error)
    data = dataclasses.replace(data, observed=data.observed * (1.0 + error * np.asarray(observed)))
    t = np.linspace(-0.25, 0.25, 4001)
    response = build_response([data], SETTING)
    predicted = response.predict(shifted(t[::100]))
    return data, response, t, np.stack([np.interp(t, t[::100], row) for row in predicted.T], axis=1)


def exact_draws(ln_p, t, n, rng):
    weight = np.exp(ln_p - ln_p.max())
    cumulative = np.cumsum(weight) / weight.sum()
    return np.interp((np.arange(n) + rng.random()) / n, cumulative, t)


def test_pits_and_densities_are_those_of_the_fit_without_the_row():
    pulls = [0.3, -1.2, 0.8, 3.5, -0.5, 0.1]
    data, response, t, predicted = toy(pulls)
    ln_rows = stats.norm.logpdf(data.observed, predicted, data.err_lo)
    rng = np.random.default_rng(2)
    theta = shifted(exact_draws(ln_rows.sum(axis=1), t, 4000, rng))
    loo = leave_one_out(response, theta, rng)
    assert loo.pareto_k.max() < 0.7
    for i in range(len(pulls)):
        without = np.exp(ln_rows.sum(axis=1) - ln_rows[:, i])
        without /= without.sum()
        pit = without @ stats.norm.cdf(data.observed[i], predicted[:, i], data.err_lo[i])
        assert loo.pit[i] == pytest.approx(pit, rel=0.05, abs=2e-3)
        assert loo.ln_p[i] == pytest.approx(np.log(without @ np.exp(ln_rows[:, i])), abs=0.03)
    # The outlier stands out more against the others than against a fit that has seen it.
    seen = stats.norm.sf(data.observed[3], np.median(response.predict(theta)[:, 3]), data.err_lo[3])
    assert 1.0 - loo.pit[3] < seen
    assert loo.p_value[3] < row_level(6, 0.05)
    assert np.all(np.delete(loo.p_value, 3) > row_level(6, 0.05))


def test_flags_come_at_the_stated_rate_and_find_what_was_planted():
    """False alarms in clean sets; a 4σ outlier, a trend and an offset that nothing absorbs."""
    rng = np.random.default_rng(3)
    n, n_sets, false_alarm = 12, 150, 0.1
    raised = {"clean": 0, "outlier": 0, "trend": 0, "scatter": 0}
    noise = rng.standard_normal((n_sets, n))
    for pulls in noise:
        for fault in raised:
            planted = pulls.copy()
            if fault == "outlier":
                planted[4] = 4.5
            if fault == "trend":
                planted += np.linspace(-2.0, 2.0, n)
            if fault == "scatter":
                planted *= 2.2
            data, response, t, predicted = toy(planted, error=0.05)
            ln_p = stats.norm.logpdf(data.observed, predicted, data.err_lo).sum(axis=1)
            loo = leave_one_out(response, shifted(exact_draws(ln_p, t, 1000, rng)), rng)
            table = discrepancy_table(discrepancies([data], loo), false_alarm)
            rows = loo.p_value < row_level(n, false_alarm)
            tests = {str(row["test"]) for row in table if row["flag"] == "misfit"}
            if fault == "clean":
                raised[fault] += bool(rows.any() or tests)
            elif fault == "outlier":
                raised[fault] += bool(rows[4])
            else:
                raised[fault] += fault in tests
    # 4 standard errors of a binomial; correlated scores may only make it rarer.
    assert raised["clean"] / n_sets < false_alarm + 4.0 * np.sqrt(false_alarm * 0.9 / n_sets)
    assert raised["clean"] > 0
    for fault in ("outlier", "trend", "scatter"):
        assert raised[fault] / n_sets > 0.7, fault


def test_randomised_pits_of_counts_are_uniform():
    bins = empty_datasets()[4]
    many = dataclasses.replace(bins, search_path=np.full(4, 1.0))
    mean = build_response([many], SETTING).predict(THETA)
    bins = dataclasses.replace(bins, search_path=1.5 / mean)  # 1.5 absorbers a bin
    response = build_response([bins], SETTING)
    rng = np.random.default_rng(5)
    theta = np.tile(THETA, (50, 1))
    pits = []
    for _ in range(150):
        seen = dataclasses.replace(bins, observed=rng.poisson(1.5, 4).astype(float))
        pits.append(leave_one_out(dataclasses.replace(response, datasets=(seen,)), theta, rng).pit)
    assert stats.kstest(np.concatenate(pits), "uniform").pvalue > 1e-3


def test_a_limit_is_judged_on_its_own_side():
    data = depths([2.5, 2.5])
    limits = dataclasses.replace(
        data, observed=data.observed * np.array([0.4, 1.6]), limit=np.array([1, 1])
    )
    loo = leave_one_out(
        build_response([limits], SETTING), np.tile(THETA, (50, 1)), np.random.default_rng(0)
    )
    assert loo.p_value[0] < 1e-4
    assert loo.p_value[1] > 0.9
    assert discrepancies([limits], loo) == []


# Weights


def test_smoothed_weights_of_a_known_ratio():
    x = np.random.default_rng(7).standard_normal(20_000)
    ln_ratio = stats.norm.logpdf(x, 0.5, 1.0) - stats.norm.logpdf(x)
    ln_weight, k = smoothed_weights(ln_ratio)
    assert np.exp(ln_weight).sum() == pytest.approx(1.0)
    assert np.exp(ln_weight) @ x == pytest.approx(0.5, abs=0.04)
    assert k < 0.5
    # A target far wider than the draws can't be reached.
    wide = stats.norm.logpdf(x, 0.0, 3.0) - stats.norm.logpdf(x)
    assert smoothed_weights(wide)[1] > 0.7
    kept = resampled(ln_weight, 5000, np.random.default_rng(1))
    assert x[kept].mean() == pytest.approx(0.5, abs=0.05)


def test_sigma_of_two_sided_p_values():
    assert_allclose([sigma_of(0.3173), sigma_of(0.0455), sigma_of(1.0)], [1.0, 2.0, 0.0], atol=1e-3)
