"""Single precision about a reference curve against double precision."""

import dataclasses
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fogline import build_fit, load_config, read_inputs
from fogline.config_settings import HIGH_COLUMN_PRIORS
from fogline.distribution import ColumnDistribution
from fogline.priors import Prior
from fogline.quantities import Setting
from fogline.response import build_response
from fogline.settings import HighColumnSettings
from fogline.walkers import WalkerResponse
from small_study import MODEL, SETTING, empty_datasets

PROJECT = Path(__file__).parents[2]
TRUTH = np.array(
    [-9.75, -11.85, -14.45, -16.6, -18.65, -20.35, -21.7, -22.7, -23.85, -26.6, 1.8, 1.9, 0.4]
)


@pytest.fixture(scope="module")
def posterior():
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(PROJECT)
        analysis = load_config("config/config.yaml").analyses["joint"]
        return build_fit(analysis, read_inputs(analysis)).posterior


def near_truth(rng, n_draws):
    return TRUTH + rng.normal(scale=0.1, size=(n_draws, len(TRUTH)))


def test_predictions_agree_near_a_posterior(posterior):
    theta = near_truth(np.random.default_rng(1), 300)
    single = posterior.walkers.predict(theta)
    # 1e-6: a few roundings of 6e-8 each, in exponents of a few units.
    assert_allclose(single, posterior.response.predict(theta), rtol=1.5e-6)


def test_predictions_agree_over_the_prior(posterior):
    x = np.random.default_rng(2).normal(size=(300, posterior.n_dim))
    theta = posterior.prior.to_parameters(x)
    assert posterior.walkers.in_range(theta).all()
    with np.errstate(under="ignore", over="ignore"):
        single, double = (r.predict(theta) for r in (posterior.walkers, posterior.response))
    # Mean fluxes are exp(-τ), which turns a relative error of a large τ into one τ times larger.
    is_flux = np.isin(np.arange(single.shape[1]), flux_rows(posterior.response))
    assert_allclose(single[:, ~is_flux], double[:, ~is_flux], rtol=1e-5)
    seen = is_flux & (double > 1e-4) & (double < 10.0)
    assert seen.sum() > 300
    # Ratios of fluxes at depths of hundreds, of which single precision knows 1e-5.
    assert_allclose(single[seen], double[seen], rtol=5e-3)


def flux_rows(response):
    rows = [
        np.arange(part.start, part.stop)
        for data, part in zip(response.datasets, response.slices, strict=True)
        if data.meta.get("form") == "mean_flux" or data.quantity == "continuum_flux"
    ]
    return np.concatenate(rows)


def test_ln_prob_agrees_with_the_double_likelihood(posterior):
    x = np.zeros((1, posterior.n_dim))
    theta = posterior.prior.to_parameters(x)
    expected = posterior.ln_likelihood(theta) + posterior.prior.ln_density(x)
    assert_allclose(posterior.ln_prob(x), expected, rtol=2e-6)


def test_reference_itself_is_exact_to_single_precision(posterior):
    walkers = WalkerResponse(posterior.response, TRUTH)
    assert_allclose(
        walkers.predict(TRUTH[None]), posterior.response.predict(TRUTH[None]), rtol=5e-7
    )


def test_far_parameters_are_refused_not_overflowed(posterior):
    far = TRUTH + np.r_[np.full(10, 36.0), np.zeros(3)]
    theta = np.stack([TRUTH, far])
    assert posterior.walkers.in_range(theta).tolist() == [True, False]


def test_everything_in_range_stays_finite(posterior):
    """The bound must be on the safe side of overflow."""
    rng = np.random.default_rng(3)
    theta = TRUTH + rng.normal(scale=12.0, size=(2000, len(TRUTH)))
    theta[:, :10] = -np.sort(-theta[:, :10], axis=1)
    kept = theta[posterior.walkers.in_range(theta)]
    assert len(kept) > 50
    with np.errstate(all="ignore"):
        assert not np.isnan(posterior.walkers.predict(kept)).any()


@pytest.mark.parametrize("form", HIGH_COLUMN_PRIORS)
def test_forms_of_high_columns_agree_with_double_precision(form):
    priors = tuple(HIGH_COLUMN_PRIORS[form].values())
    model = dataclasses.replace(
        MODEL, pivots=MODEL.pivots[:7], high_column=HighColumnSettings(form, 22.5, priors)
    )
    distribution = ColumnDistribution.from_settings(model)
    setting = Setting(distribution, SETTING.cosmology, model.doppler)
    response = build_response(empty_datasets(), setting)
    prior = Prior(model)
    theta = prior.to_parameters(0.5 * np.random.default_rng(5).normal(size=(100, prior.n_dim)))
    walkers = WalkerResponse(response, prior.to_parameters(np.zeros((1, prior.n_dim)))[0])
    assert walkers.in_range(theta).all()
    assert_allclose(walkers.predict(theta), response.predict(theta), rtol=2e-5)
