"""Calibration by simulation of a small model: the fit is calibrated, and wrong errors are found."""

from __future__ import annotations

import dataclasses
from tempfile import TemporaryDirectory

import numpy as np
import pytest
from astropy.table import Table

import small_study
from fogline.constraint_files import read_constraint_files
from fogline.cosmology import Cosmology
from fogline.datasets import hypothetical
from fogline.distribution import ColumnDistribution
from fogline.posterior import Posterior
from fogline.priors import Prior
from fogline.quantities import Setting
from fogline.response import build_response
from fogline.response_file import Fit
from fogline.settings import EvolutionSettings
from fogline.trust.calibration import (
    _Both,
    calibrate,
    quantity_names,
    response_of,
    sampler_of,
    within_reach,
)
from fogline.trust.ranks import rank_table
from fogline.trust.simulate import simulate
from small_study import ANALYSIS, in_bins

N_DRAWS = 49
REPLICATES = 20

MODEL = dataclasses.replace(
    ANALYSIS.model,
    pivots=(12.0, 15.0, 20.3, 22.5),
    evolution=EvolutionSettings((20.3,), ({"dist": "norm", "loc": 1.5, "scale": 1.0},)),
)
SETTING = Setting(ColumnDistribution.from_settings(MODEL), Cosmology(70.0, 0.3), MODEL.doppler)


@pytest.fixture(scope="module")
def fit():
    """Forest columns in dex at two redshifts, and counts of damped absorbers."""
    forest = in_bins(
        hypothetical("column_distribution", [2.2, 2.2, 2.2, 3.4, 3.4, 3.4], per="dX"),
        np.linspace(12.5, 15.5, 7),
        logarithmic=True,
    )
    damped = in_bins(
        hypothetical("column_distribution", [2.8] * 4, per="dX"),
        [20.3, 20.7, 21.1, 21.6, 22.3],
        counts=True,
        search_path=np.full(4, 500.0),
    )
    theta = Prior(MODEL).to_parameters(np.zeros((1, 5)))
    datasets = []
    for name, data in (("forest", forest), ("damped", damped)):
        mean = build_response([data], SETTING).predict(theta)[0]
        err = np.full(len(mean), 0.15)
        observed = np.maximum(np.round(mean), 1.0) if data.counts else mean
        data = dataclasses.replace(data, name=name, path=f"{name}.ecsv", observed=observed)
        datasets.append(dataclasses.replace(data, err_lo=err, err_hi=err))
    analysis = dataclasses.replace(ANALYSIS, model=MODEL)
    return Fit(analysis, build_response(datasets, SETTING), {"fingerprint": "", "inputs": {}})


def with_half_the_errors(datasets):
    """What a fit makes of data whose errors are stated at half their size."""
    return tuple(
        data
        if data.counts
        else dataclasses.replace(data, err_lo=0.5 * data.err_lo, err_hi=0.5 * data.err_hi)
        for data in datasets
    )


def judged(fit, mode, alter=None, joint=None):
    made = calibrate(fit, mode, range(REPLICATES), N_DRAWS, joint, alter)
    assert all(replicate.met_target for replicate in made)
    ranks = np.array([replicate.ranks for replicate in made])
    return rank_table(ranks, N_DRAWS, quantity_names(fit), 0.05)


def test_truths_of_the_prior_are_ranked_uniformly(fit):
    table = judged(fit, "prior")
    assert not any(str(flag) for flag in table["flag"])


def test_errors_of_half_their_size_are_found(fit):
    table = judged(fit, "prior", with_half_the_errors)
    flagged = {str(row["quantity"]): str(row["flag"]) for row in table if str(row["flag"])}
    assert flagged
    assert all("narrow" in words for words in flagged.values())
    # The scatter of the truth is about twice the stated one where the forest fixes it.
    assert max(float(width) for width in table["width"]) > 1.35


def test_data_like_those_given_are_ranked_uniformly(fit):
    # The truths of this mode: draws of the posterior of the data.
    from fogline.trust.refit import sample

    joint = sample(fit.posterior, sampler_of(fit.analysis.sampler, fit.prior.n_dim, 3)).x
    table = judged(fit, "posterior", joint=joint)
    assert not any(str(flag) for flag in table["flag"])


def test_original_and_replicated_data_together_are_the_sum_of_both():
    """Predictions are made once; the likelihoods are those of two posteriors with one prior."""
    datasets = small_study.empty_datasets()
    path = Table({"z_start": [2.0, 2.4], "z_end": [3.4, 3.9]})
    listed = Table({"z": [2.5, 2.9, 3.2], "log_nhi": [20.4, 20.9, 21.4], "err": [0.1, 0.1, 0.15]})
    with TemporaryDirectory() as folder:
        path.meta = {"kind": "sightlines", "source": "invented"}
        path.write(f"{folder}/path.ecsv", format="ascii.ecsv")
        listed.meta = {
            "quantity": "absorber_list",
            "source": "invented",
            "survey_path": "path.ecsv",
            "log_nhi_min": 20.3,
        }
        listed.write(f"{folder}/listed.ecsv", format="ascii.ecsv")
        absorbers = read_constraint_files([f"{folder}/listed.ecsv"])
    response = build_response(datasets, small_study.SETTING)
    filled = [
        dataclasses.replace(
            data,
            observed=np.round(response.predict(small_study.THETA)[rows], 0 if data.counts else 9),
            err_lo=0.1 * response.predict(small_study.THETA)[rows],
            err_hi=0.1 * response.predict(small_study.THETA)[rows],
        )
        for data, rows in zip(datasets, response.slices, strict=True)
    ]
    # The list in the middle: rows after it are found all the same.
    ordered = [*filled[:2], *absorbers, *filled[2:]]
    made = Fit(ANALYSIS, build_response(ordered, small_study.SETTING), {"inputs": {}})
    rng = np.random.default_rng(4)
    again = simulate(made, small_study.THETA, rng)
    first, second = made.posterior, Posterior.of(response_of(made, again), made.prior)
    x = 0.3 * rng.standard_normal((40, made.prior.n_dim))
    both = first.ln_prob(x) + second.ln_prob(x) - made.prior.ln_density(x)
    np.testing.assert_allclose(_Both(first, second).ln_prob(x), both, rtol=1e-9)


def test_reach_is_a_factor_of_all_measurements(fit):
    datasets = fit.response.datasets
    inside = within_reach(datasets, datasets)
    observed = np.concatenate([d.observed for d in datasets])
    near, far = observed.copy(), observed.copy()
    near[:6] += 0.99
    near[6:] *= 9.9
    far[3] -= 1.01
    assert inside(np.stack([observed, near, far])).tolist() == [True, True, False]
    far = observed.copy()
    far[-1] /= 10.1
    assert inside(far[None]).tolist() == [False]


def test_response_of_replicates_is_that_of_the_rows(fit):
    again = response_of(fit, fit.response.datasets)
    theta = fit.prior.to_parameters(np.zeros((1, fit.prior.n_dim)))
    np.testing.assert_array_equal(again.predict(theta), fit.response.predict(theta))
