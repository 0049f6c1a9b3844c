"""Posterior predictive checks on data of which it is known whether they fit."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats

from fogline.datasets import hypothetical
from fogline.likelihood import Likelihood
from fogline.response import build_response
from fogline.row_tables import row_table
from fogline.trust.predictive import (
    check_predictive,
    dataset_summary,
    predictive_table,
)
from small_study import SETTING, THETA, empty_datasets

# Draws of a "posterior" as narrow as a point: replicates then scatter by the rows' errors alone.
THETA_DRAWS = np.tile(THETA, (4000, 1))


def many_rows(n, error=0.1):
    """Forest depths at one redshift with equal errors, values not yet drawn."""
    data = hypothetical(
        "lya_opacity", np.full(n, 2.5), form="tau", log_nhi_min=12.0, log_nhi_max=17.2
    )
    predicted = build_response([data], SETTING).predict(THETA)
    return dataclasses.replace(data, err_lo=error * predicted, err_hi=error * predicted), predicted


def check(datasets, seed=3, theta=THETA_DRAWS):
    response = build_response(datasets, SETTING)
    return check_predictive(response, theta, np.random.default_rng(seed))


def drawn_from_the_model(n, seed, scatter=1.0):
    data, predicted = many_rows(n)
    noise = scatter * np.random.default_rng(seed).standard_normal(n)
    return dataclasses.replace(data, observed=predicted + noise * data.err_lo)


def test_p_values_of_data_drawn_from_the_model_are_uniform():
    data = drawn_from_the_model(400, seed=21)
    found = check([data])
    assert stats.kstest(found.p_values, "uniform").pvalue > 1e-3
    assert stats.kstest(found.pulls, "norm").pvalue > 1e-3
    # The control: with twice the scatter they are not.
    wrong = check([drawn_from_the_model(400, seed=21, scatter=2.0)])
    assert stats.kstest(wrong.p_values, "uniform").pvalue < 1e-6


def test_p_values_of_data_sets_drawn_from_the_model_are_uniform():
    def p_value(seed):
        return check([drawn_from_the_model(10, seed)], theta=THETA_DRAWS[:400]).dataset_p_values[0]

    assert stats.kstest([p_value(seed) for seed in range(200)], "uniform").pvalue > 1e-3


@pytest.mark.parametrize(
    ("scatter", "flag"), [(1.0, ""), (1.6, "scatter too large"), (0.3, "scatter too small")]
)
def test_scatter_of_a_data_set_is_judged(scatter, flag):
    datasets = (drawn_from_the_model(60, seed=5, scatter=scatter),)
    summary = dataset_summary(datasets, check(datasets))
    assert summary["hypothetical"]["flag"] == flag
    assert summary["hypothetical"]["quantity"] == "lya_opacity"


def test_an_outlier_is_flagged_and_its_pull_has_its_sign():
    data, predicted = many_rows(5)
    observed = predicted + np.array([0.0, 4.5, -4.5, 1.0, -1.0]) * data.err_lo
    datasets = (dataclasses.replace(data, observed=observed),)
    found = check(datasets)
    assert_allclose(found.pulls, [0.0, 4.5, -4.5, 1.0, -1.0], atol=1e-10)
    table = predictive_table(datasets, found)
    assert table["flag"].tolist() == ["", "outside", "outside", "", ""]
    # Two-sided: 1σ is 32%, within 4 standard errors of 4000 draws.
    assert_allclose(found.p_values[3:], 2.0 * stats.norm.sf(1.0), atol=0.06)
    assert np.all(found.p_values[1:3] < 0.0027)
    assert found.p_values[0] > 0.9


def test_replicates_have_the_moments_of_the_rows():
    datasets = empty_datasets()
    predicted = build_response(datasets, SETTING).predict(THETA)
    rows = build_response(datasets, SETTING).slices
    datasets = [
        dataclasses.replace(
            d, observed=predicted[s], err_lo=0.1 * predicted[s], err_hi=0.1 * predicted[s]
        )
        for d, s in zip(datasets, rows, strict=True)
    ]
    found = check(datasets)
    sigma = np.where(np.repeat([d.counts for d in datasets], [d.n_rows for d in datasets]),
                     np.sqrt(predicted), 0.1 * predicted)  # fmt: skip
    # Standard errors of 4000 draws: σ/63 of the mean, 1.1% of σ.
    assert np.all(np.abs(found.replicates.mean(axis=0) - predicted) < 4.5 * sigma / np.sqrt(4000))
    assert_allclose(found.replicates.std(axis=0), sigma, rtol=0.06)


def test_replicates_of_lognormal_rows_are_in_the_files_own_space():
    data, predicted = many_rows(3, error=0.2)
    data = dataclasses.replace(
        data, observed=predicted, meta={**data.meta, "likelihood": "lognormal"}
    )
    found = check([data])
    assert np.all(found.replicates > 0.0)
    assert_allclose(np.log(found.replicates).std(axis=0), 0.2, rtol=0.05)
    assert_allclose(found.pulls, 0.0, atol=1e-10)


def test_counts_far_from_their_mean_are_flagged():
    bins = empty_datasets()[4]
    predicted = build_response([bins], SETTING).predict(THETA)
    observed = np.round(predicted)
    observed[1] += np.ceil(5.0 * np.sqrt(predicted[1]))
    found = check([dataclasses.replace(bins, observed=observed)])
    assert (found.p_values < 0.0027).tolist() == [False, True, False, False]
    assert found.pulls[1] == pytest.approx(
        (observed[1] - predicted[1]) / np.sqrt(predicted[1]), rel=1e-12
    )


def test_ties_of_small_counts_are_shared():
    # With a mean of 0.5, no absorber is the likeliest outcome, not a surprise.
    bins = empty_datasets()[4]
    predicted = build_response([bins], SETTING).predict(THETA)
    bins = dataclasses.replace(bins, search_path=bins.search_path * 0.5 / predicted)
    found = check([dataclasses.replace(bins, observed=np.zeros(4))])
    assert np.all(found.p_values > 0.5)


@pytest.mark.parametrize("sign", [1, -1])
def test_limits_are_judged_on_one_side(sign):
    data, predicted = many_rows(2)
    observed = predicted * np.array([1.0 + 0.5 * sign, 1.0 - 0.5 * sign])
    limits = dataclasses.replace(data, observed=observed, limit=np.full(2, sign))
    kept, broken = check([limits]).p_values
    # 5σ within the limit, and 5σ beyond it.
    assert kept > 0.99
    assert broken < 0.0027


def test_the_seed_decides():
    data = drawn_from_the_model(5, seed=2)
    assert_array_equal(check([data]).replicates, check([data]).replicates)
    assert np.any(check([data]).replicates != check([data], seed=4).replicates)


def test_table_has_one_line_a_row():
    datasets = tuple(empty_datasets())
    table = row_table(datasets)
    assert table.colnames == ["dataset", "row", "quantity", "z", "observed"]
    assert len(table) == 12
    assert table["dataset"].tolist()[:3] == ["lya", "lya", "lls"]
    assert table["row"].tolist()[:5] == [0, 1, 0, 1, 0]
    data = drawn_from_the_model(3, seed=2)
    assert predictive_table((data,), check([data])).colnames[5:] == [
        "median",
        "lo68",
        "hi68",
        "lo95",
        "hi95",
        "pull",
        "p_value",
        "loo_pit",
        "loo_p_value",
        "pareto_k",
        "flag",
    ]
    assert Likelihood.from_datasets([data]).observed.shape == (3,)
