"""Who constrains what: Fisher information against second derivatives and closed forms."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from fogline.datasets import hypothetical
from fogline.derived import Draws
from fogline.headlines import headline_draws
from fogline.posterior import Posterior
from fogline.response import build_response
from fogline.trust.information import gradient_of, information_at, power_scaling
from fogline.trust.information_tables import information_tables
from small_study import ANALYSIS, PRIOR, SETTING, THETA, empty_datasets


def true_x():
    """Coordinates of the small study's parameters."""
    from scipy.optimize import least_squares

    found = least_squares(
        lambda x: PRIOR.to_parameters(x[None])[0] - THETA, np.zeros(PRIOR.n_dim), xtol=1e-12
    )
    return found.x


X = true_x()


def at_the_model(datasets):
    """Data sets that hold what the model predicts, 10% errors, and their posterior."""
    response = build_response(datasets, SETTING)
    predicted = response.predict(PRIOR.to_parameters(X[None]))[0]
    filled = [
        dataclasses.replace(
            data,
            observed=predicted[rows],
            err_lo=0.1 * np.abs(predicted[rows]),
            err_hi=0.1 * np.abs(predicted[rows]),
        )
        for data, rows in zip(datasets, response.slices, strict=True)
    ]
    return Posterior.of(build_response(filled, SETTING), PRIOR)


@pytest.fixture(scope="module")
def posterior():
    return at_the_model(empty_datasets())


def test_information_is_the_curvature_of_the_likelihood_where_data_fit(posterior):
    """With residuals of zero the second derivative of -ln L is J^T S^-1 J, for counts too."""
    found = information_at(posterior, X).fisher.sum(axis=0)
    h = 3e-3
    steps = h * np.eye(len(X))

    def ln_l(points):
        return posterior.ln_likelihood(PRIOR.to_parameters(points))

    curvature = np.empty_like(found)
    for i, a in enumerate(steps):
        for j, b in enumerate(steps):
            corners = ln_l(np.stack([X + a + b, X + a - b, X - a + b, X - a - b]))
            curvature[i, j] = -(corners[0] - corners[1] - corners[2] + corners[3]) / (4.0 * h * h)
    scale = np.sqrt(np.outer(np.diag(found), np.diag(found))) + 1e-3
    assert_allclose(curvature / scale, found / scale, atol=5e-3)


def test_shares_add_up_and_parameters_are_shared_out(posterior):
    found = information_at(posterior, X)
    gradient = gradient_of(PRIOR.to_parameters, X)
    sigma, data, prior = found.shares(gradient)
    assert_allclose(data.sum(axis=1) + prior, 1.0, rtol=1e-10)
    assert (data >= -1e-12).all()
    assert found.n_constrained.sum() + found.n_prior == pytest.approx(len(X), rel=1e-10)
    assert_allclose(sigma**2, np.diag(gradient @ found.covariance @ gradient.T), rtol=1e-10)
    # Where no column is counted the prior holds more of log f than where DLAs are.
    names = list(PRIOR.names)
    assert prior[names.index("log_f[19.0]")] > 3.0 * prior[names.index("log_f[20.3]")]
    dla = found.names.index("dla")
    assert data[names.index("log_f[21.0]"), dla] > 0.5
    assert data[names.index("log_f[13.5]"), dla] < 0.05


def test_one_measurement_of_one_direction_in_closed_form():
    """m with error s on a prior of variance v = |dm/dx|^2: share v / (v + s^2) of its variance."""
    data = hypothetical("lya_opacity", [2.5], form="tau", log_nhi_min=12.0, log_nhi_max=17.2)
    posterior = at_the_model([data])
    found = information_at(posterior, X)

    def depth(points):
        return posterior.response.predict(PRIOR.to_parameters(points))

    gradient = gradient_of(depth, X)
    variance = float((gradient**2).sum())
    error = float(posterior.response.datasets[0].err_lo[0])
    sigma, share, prior = found.shares(gradient)
    assert sigma[0] == pytest.approx((1.0 / variance + 1.0 / error**2) ** -0.5, rel=1e-6)
    assert share[0, 0] == pytest.approx(variance / (variance + error**2), rel=1e-6)
    assert prior[0] == pytest.approx(error**2 / (variance + error**2), rel=1e-6)
    assert found.n_constrained[0] == pytest.approx(variance / (variance + error**2), rel=1e-6)


@pytest.mark.parametrize("sign", [1, -1])
def test_a_limit_informs_as_its_probit_does(sign):
    """Expected information of a yes/no answer: φ² / [Φ (1 - Φ)] per squared gradient."""
    data = hypothetical("lya_opacity", [2.5], form="tau", log_nhi_min=12.0, log_nhi_max=17.2)
    posterior = at_the_model([data])
    limited = dataclasses.replace(
        posterior.response.datasets[0], limit=np.array([sign]), meta={**data.meta, "source": ""}
    )
    measured = information_at(posterior, X).fisher[0]
    limit = information_at(Posterior.of(build_response([limited], SETTING), PRIOR), X).fisher[0]
    # The model stands at the limit itself, z_C σ beyond the measurement behind it.
    gap = -stats.norm.ppf(0.95)
    chance = stats.norm.cdf(gap)
    expected = stats.norm.pdf(gap) ** 2 / (chance * (1.0 - chance))
    assert_allclose(np.trace(limit) / np.trace(measured), expected, rtol=1e-5)


def test_power_scaling_of_a_normal_mean():
    """Prior N(0,1) to the power a, likelihood N(y, s²): mean y / (1 + a s²), closed form."""
    y, s = 1.5, 0.8
    mean, variance = y / (1.0 + s**2), s**2 / (1.0 + s**2)
    draws = mean + np.sqrt(variance) * np.random.default_rng(3).standard_normal((200_000, 1))
    derivative = -y * s**2 / (1.0 + s**2) ** 2  # of the mean by a, at a = 1
    expected = np.log(2.0) * derivative / np.sqrt(variance)
    found = power_scaling(draws, stats.norm.logpdf(draws[:, 0]))
    assert found[0] == pytest.approx(expected, abs=0.02)
    # The likelihood pulls the other way, by as much: its power divides that of the prior.
    found = power_scaling(draws, stats.norm.logpdf(y, draws[:, 0], s))
    assert found[0] == pytest.approx(-expected, abs=0.02)
    assert np.isnan(power_scaling(np.array([[1.0], [np.inf], [2.0]]), np.arange(3.0))[0])


def test_tables_name_every_parameter_and_headline(posterior):
    rng = np.random.default_rng(4)
    x = X + 0.05 * rng.standard_normal((300, len(X)))
    theta = PRIOR.to_parameters(x)

    def draws(parameters):
        return Draws(parameters, SETTING, ANALYSIS.derive)

    tables = information_tables(posterior, x, theta, draws)
    headlines = headline_draws(draws(theta))
    quantities = tables["information"]["quantity"].tolist()
    assert quantities == [*PRIOR.names, *headlines.quantities]
    shares = [c for c in tables["information"].colnames if c.startswith("share_")]
    assert len(shares) == 1 + len(posterior.response.datasets)
    assert_allclose(sum(np.asarray(tables["information"][c]) for c in shares), 1.0, rtol=1e-6)
    assert tables["constraints"]["dataset"][-1] == "prior"
    assert tables["information_by_column"]["log_nhi"][[0, -1]].tolist() == [12.0, 22.5]
    # Headlines are those of the derived tables.
    at = headlines.quantities.index("log_f[15]")
    expected = SETTING.distribution.log_f(theta, [15.0], ANALYSIS.derive.column_redshifts[0])
    assert_allclose(headlines.values[:, at], expected[:, 0])
