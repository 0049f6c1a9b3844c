"""Forecasts: closed forms of linear Gaussian problems and of gamma posteriors, failures, tables.

Common practice: nothing here comes from a publication.
"""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats
from scipy.special import gammaln, polygamma

from fogline.comparison import HEADLINES
from fogline.datasets import hypothetical
from fogline.derived import Draws
from fogline.figures.forecast import draw_forecast
from fogline.headlines import headline_draws
from fogline.likelihood import Likelihood
from fogline.trust.forecast import (
    LEAST_EFFECTIVE,
    WORST_K,
    Shrinkage,
    expected_shrinkage,
    forecast_key,
    forecast_table,
    given,
    smoothed,
)
from small_study import ANALYSIS, PRIOR, SETTING, THETA

COVARIANCE = np.array([[1.0, 0.6, 0.0], [0.6, 1.0, 0.0], [0.0, 0.0, 1.0]])
JACOBIAN = np.array([[1.0, 0.5, 0.0], [0.2, 1.0, 0.0]])
AXES = {"first": (1.0, 0.0, 0.0), "contrast": (1.0, -1.0, 0.0), "apart": (0.0, 0.0, 1.0)}


def rows(errors, **changes):
    data = hypothetical("lls_incidence", [2.0, 3.0], per="dz", tau_min=2.0)
    errors = np.asarray(errors, float)
    values = {"observed": np.full(2, 10.0), "err_lo": errors, "err_hi": errors}
    return dataclasses.replace(data, **{**values, **changes})


def linear_case(errors, seed, n_draws=4000):
    """Return exact ratios and the forecast of a linear Gaussian problem."""
    rng = np.random.default_rng(seed)
    theta = rng.standard_normal((n_draws, 3)) @ np.linalg.cholesky(COVARIANCE).T
    axes = {name: np.array(axis) for name, axis in AXES.items()}
    likelihood = Likelihood.from_datasets([rows(errors)])
    quantities = {name: theta @ axis for name, axis in axes.items()}
    found = expected_shrinkage(10.0 + theta @ JACOBIAN.T, likelihood, quantities, rng, 128)
    information = JACOBIAN.T @ np.diag(np.asarray(errors) ** -2.0) @ JACOBIAN
    after = np.linalg.inv(np.linalg.inv(COVARIANCE) + information)
    exact = {
        name: float(np.sqrt(axis @ after @ axis / (axis @ COVARIANCE @ axis)))
        for name, axis in axes.items()
    }
    return exact, found


# Closed forms


@pytest.mark.parametrize("errors", [(2.0, 2.0), (0.7, 0.9)])
@pytest.mark.parametrize("seed", [11, 12, 13])
def test_linear_gaussian_problem_has_its_closed_form(errors, seed):
    exact, found = linear_case(errors, seed)
    assert not found.unreliable
    for name, ratio in exact.items():
        assert abs(found.ratio[name] - ratio) < 4 * found.ratio_error[name]
        assert_allclose(found.ratio[name], ratio, rtol=0.02)
        assert found.ratio_error[name] < 0.02
        assert abs(found.linear[name] - ratio) < 4 * found.linear_error[name]
    assert exact["apart"] == 1.0  # what it cannot inform stays as it is


def test_wrong_errors_would_be_seen():
    wrong, _ = linear_case((1.0, 1.0), 1, n_draws=200)
    _, found = linear_case((0.7, 0.9), 11)
    assert abs(found.ratio["first"] - wrong["first"]) > 4 * found.ratio_error["first"]


def test_stated_errors_cover_the_scatter_of_forecasts():
    exact, _ = linear_case((0.7, 0.9), 1)
    found = [linear_case((0.7, 0.9), seed, n_draws=1000)[1] for seed in range(20, 50)]
    pulls = [(f.ratio["first"] - exact["first"]) / f.ratio_error["first"] for f in found]
    # 30 unit normals: the mean has an error of 0.18, the standard deviation one of 0.13.
    assert abs(np.mean(pulls)) < 4 * 0.18
    assert 1.0 - 4 * 0.13 < np.std(pulls) < 1.0 + 4 * 0.13


def test_counts_have_the_closed_form_of_a_gamma_posterior():
    """A rate ~ gamma(a, 1/b), counted over t: the posterior is gamma(a + n, 1/(b + t))."""
    a, b, t = 9.0, 3.0, 2.0
    rng = np.random.default_rng(5)
    rate = rng.gamma(a, 1.0 / b, 4000)
    data = hypothetical("lls_incidence", [3.0], per="dz", tau_min=2.0)
    one = np.ones(1)
    data = dataclasses.replace(data, counts=True, search_path=t * one, observed=one)
    likelihood = Likelihood.from_datasets([data])
    found = expected_shrinkage(t * rate[:, None], likelihood, {"rate": rate}, rng, 256)
    n = np.arange(200)
    ln_p = gammaln(a + n) - gammaln(a) - gammaln(n + 1) + a * np.log(b) + n * np.log(t)
    p = np.exp(ln_p - (a + n) * np.log(b + t))
    assert_allclose(p.sum(), 1.0)
    exact = p @ (np.sqrt(a + n) / (b + t)) / (np.sqrt(a) / b)
    assert abs(found.ratio["rate"] - exact) < 4 * found.ratio_error["rate"]
    assert_allclose(found.ratio["rate"], exact, rtol=0.02)
    # The regression is E[var]^1/2, a little above.
    bound = np.sqrt(p @ (a + n)) / (b + t) / (np.sqrt(a) / b)
    assert bound > exact
    assert abs(found.linear["rate"] - bound) < 4 * found.linear_error["rate"]


@pytest.mark.parametrize("changes", [{"likelihood": "lognormal"}, {"student_dof": 4.0}, {}])
def test_nuisances_dilute(changes):
    meta = {"source": "", "confidence": 0.95, "per": "dz", "tau_min": 2.0, **changes}
    scaled = {**meta, "scale": {"dist": "norm", "loc": 1.0, "scale": 0.1}}
    rng = np.random.default_rng(6)
    x = rng.standard_normal(2000)
    predicted = (10.0 + x)[:, None] * np.ones(2)
    found = []
    for some, nuisances in ((meta, None), (scaled, rng.normal(1.0, 0.1, (2000, 1)))):
        likelihood = Likelihood.from_datasets([rows((1.0, 1.0), meta=some)])
        found.append(expected_shrinkage(predicted, likelihood, {"x": x}, rng, 64, nuisances))
    free = found[0]
    assert free.ratio["x"] < found[1].ratio["x"] - 3 * found[1].ratio_error["x"]
    if not changes:
        assert_allclose(free.ratio["x"], 3.0**-0.5, rtol=0.02)


# Where weights fail


def test_strong_candidates_are_unreliable_and_bounded_by_regression():
    exact, found = linear_case((0.02, 0.03), 2, n_draws=2000)
    assert found.unreliable
    assert found.share_failed > 0.5
    for name, ratio in exact.items():
        assert found.best(name) == (found.linear[name], found.linear_error[name])
        assert abs(found.best(name)[0] - ratio) < 4 * found.linear_error[name]


def test_regression_follows_logarithms():
    """Of ln rate, counted so long that weights fail: var(ln rate | n) = ψ'(a + n)."""
    a, t = 9.0, 3000.0
    rng = np.random.default_rng(10)
    rate = rng.gamma(a, 1.0, 4000)
    data = hypothetical("lls_incidence", [3.0], per="dz", tau_min=2.0)
    data = dataclasses.replace(data, counts=True, observed=np.ones(1), search_path=t * np.ones(1))
    likelihood = Likelihood.from_datasets([data])
    found = expected_shrinkage(t * rate[:, None], likelihood, {"ln": np.log(rate)}, rng)
    assert found.unreliable
    n = rng.poisson(t * rng.gamma(a, 1.0, 100_000))
    exact = np.sqrt(np.mean(polygamma(1, a + n)) / polygamma(1, a))
    assert found.linear["ln"] > exact - 4 * found.linear_error["ln"]
    assert found.linear["ln"] < 1.1 * exact
    # A straight line in n would leave most of the curvature of the logarithm.
    straight = np.sqrt(1.0 - np.corrcoef(rate, np.log(rate))[0, 1] ** 2)
    assert straight > 3 * exact


def test_few_effective_draws_are_unreliable_whatever_k():
    found = Shrinkage({}, {}, {}, {}, {}, np.zeros(20), np.full(20, LEAST_EFFECTIVE - 1))
    assert found.unreliable
    better = dataclasses.replace(found, n_effective=np.full(20, LEAST_EFFECTIVE))
    assert not better.unreliable
    k = np.where(np.arange(20) < 3, WORST_K, 0.0)
    assert dataclasses.replace(better, pareto_k=k).unreliable
    assert dataclasses.replace(better, pareto_k=k).upper_k == WORST_K


def test_copies_of_the_truth_are_left_out():
    rng = np.random.default_rng(7)
    x = np.repeat(rng.standard_normal(500), 4)  # as chains that refuse most steps
    likelihood = Likelihood.from_datasets([rows((0.5, 0.5))])
    predicted = 10.0 + x[:, None] * np.ones(2)
    found = expected_shrinkage(predicted, likelihood, {"x": x}, rng, 128)
    assert abs(found.ratio["x"] - 9.0**-0.5) < 4 * found.ratio_error["x"]


def test_what_is_not_finite_is_told_as_nan():
    rng = np.random.default_rng(8)
    x = rng.standard_normal(400)
    far = np.where(x > 2.0, np.inf, x)
    likelihood = Likelihood.from_datasets([rows((0.5, 0.5))])
    predicted = 10.0 + x[:, None] * np.ones(2)
    found = expected_shrinkage(predicted, likelihood, {"x": x, "far": far}, rng, 16)
    assert np.isnan(found.best("far")[0])
    assert 0.0 < found.best("x")[0] < 1.0
    nothing = expected_shrinkage(far[:, None] * np.ones(2), likelihood, {"x": x}, rng, 16)
    assert nothing.unreliable
    assert np.isnan(nothing.best("x")[0])
    table = forecast_table({"none": nothing, "some": found})
    assert list(table["candidate"]) == ["some", "some", "none"]
    assert list(table["unreliable"]) == [found.unreliable, True, True]


def test_smoothed_weights():
    weight, k = smoothed(np.zeros(100))
    assert_array_equal(weight, 0.01)
    assert k == -np.inf
    ln_weight = np.where(np.arange(200) == 7, 0.0, -1e4)
    weight, k = smoothed(ln_weight)
    assert weight[7] > 0.99
    assert k == np.inf
    rng = np.random.default_rng(9)
    heavy = stats.pareto.rvs(1.0, size=4000, random_state=rng)  # k = 1
    assert smoothed(np.log(heavy))[1] > WORST_K
    light = stats.pareto.rvs(4.0, size=4000, random_state=rng)  # k = 1/4
    assert smoothed(np.log(light))[1] < WORST_K


# What is asked for


def test_data_are_replaced_and_nothing_else():
    likelihood = Likelihood.from_datasets([rows((0.5, 0.7))])
    other = given(likelihood, np.array([9.0, 11.0]))
    assert_array_equal(other.observed, [9.0, 11.0])
    assert_array_equal(likelihood.observed, 10.0)
    at = np.array([[9.0, 11.0]])
    expected = stats.norm.logpdf(0.0, scale=[0.5, 0.7])
    assert_allclose(other.ln_rows(at)[0], expected)


def test_same_generator_same_forecast():
    first, second = (linear_case((1.0, 1.0), 3, n_draws=400)[1] for _ in range(2))
    assert first.ratio == second.ratio


def test_bad_arguments_are_named():
    rng = np.random.default_rng(1)
    likelihood = Likelihood.from_datasets([rows((0.5, 0.5))])
    x = rng.standard_normal(400)
    with pytest.raises(ValueError, match=r"shape \(400, 3\), must be \(n_draws, 2\)"):
        expected_shrinkage(np.ones((400, 3)), likelihood, {"x": x}, rng)
    with pytest.raises(ValueError, match="one value for each of 300 draws"):
        expected_shrinkage(np.ones((300, 2)), likelihood, {"x": x}, rng)
    with pytest.raises(ValueError, match="at least 100 draws and 2 outcomes, got 400 and 1"):
        expected_shrinkage(np.ones((400, 2)), likelihood, {"x": x}, rng, 1)
    limits = Likelihood.from_datasets([rows((0.5, 0.5), limit=np.array([1, 0]))])
    with pytest.raises(ValueError, match="no limits"):
        expected_shrinkage(np.ones((400, 2)), limits, {"x": x}, rng)


def test_table_is_ranked():
    _, weak = linear_case((2.0, 2.0), 4, n_draws=400)
    _, strong = linear_case((0.7, 0.9), 4, n_draws=400)
    keyed = [
        dataclasses.replace(
            found,
            **{
                part: {forecast_key(name, 2.5): v for name, v in getattr(found, part).items()}
                for part in ("sigma", "ratio", "ratio_error", "linear", "linear_error")
            },
        )
        for found in (weak, strong)
    ]
    table = forecast_table({"weak": keyed[0], "strong": keyed[1]})
    assert list(table["candidate"]) == ["strong"] * 3 + ["weak"] * 3
    assert table.colnames == [
        *("candidate", "quantity", "z", "sigma_now"),
        *("ratio", "ratio_error", "pareto_k", "unreliable"),
    ]
    assert set(table["z"]) == {2.5}
    assert list(table["quantity"][:3]) == ["first", "contrast", "apart"]
    assert_allclose(table["sigma_now"][0], 1.0, rtol=0.2)
    assert (np.diff(table["ratio"][:3]) > 0.0).all()
    assert len(forecast_table({})) == 0


def test_headlines_of_draws():
    x = 0.1 * np.random.default_rng(1).standard_normal((20, len(PRIOR.coordinate_names)))
    spread = PRIOR.to_parameters(x)
    draws = Draws(THETA + spread - spread.mean(axis=0), SETTING, ANALYSIS.derive)
    made = headline_draws(draws).by_key()
    assert {name.split("@")[0] for name in made} >= {h.quantity for h in HEADLINES}
    assert all(values.shape == (20,) for values in made.values())
    log_f = SETTING.distribution.log_f(draws.theta, np.array([20.5]), 2.5)[:, 0]
    assert_allclose(made["log_f[20.5]@2.5"], log_f, rtol=1e-12)
    rising = made["tau_eff@4"] > made["tau_eff@2"]
    assert rising.all()


# The figure


def test_figure_has_a_row_for_each_candidate():
    _, weak = linear_case((2.0, 2.0), 4, n_draws=400)
    _, strong = linear_case((0.02, 0.03), 4, n_draws=400)
    figure = draw_forecast(forecast_table({"weak_one": weak, "strong": strong}))
    (axes,) = figure.axes
    assert [label.get_text() for label in axes.get_yticklabels()] == ["strong", "weak one"]
    assert axes.get_xlim()[0] == 0.0
    with pytest.raises(ValueError, match="no candidates"):
        draw_forecast(forecast_table({}))
