"""Faults planted into the demo's data are found, and nothing else is flagged with them.

Common practice: planted faults of known size; no published source.
"""

from __future__ import annotations

import dataclasses
from pathlib import Path

import numpy as np
import pytest

from fogline import build_fit, load_config, read_inputs
from fogline.ensemble import run_ensemble
from fogline.response_file import Fit
from fogline.trust.calibration import sampler_of
from fogline.trust.discrepancies import discrepancies, discrepancy_table, row_level
from fogline.trust.hold_outs import hold_out
from fogline.trust.leave_one_out import leave_one_out
from fogline.trust.tension_tables import tension_table

ROOT = Path(__file__).parents[2]


@pytest.fixture(scope="module")
def clean() -> Fit:
    """The demo's joint analysis."""
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(ROOT)
        analysis = load_config("config/config.yaml").analyses["joint"]
        return build_fit(analysis, read_inputs(analysis))


def changed(fit: Fit, name: str, change) -> Fit:
    """Return the fit with the values of one data set changed; its response stays."""
    datasets = tuple(
        dataclasses.replace(data, observed=change(data)) if data.name == name else data
        for data in fit.response.datasets
    )
    response = dataclasses.replace(fit.response, datasets=datasets)
    return dataclasses.replace(fit, response=response)


def draws(fit: Fit) -> np.ndarray:
    """Posterior draws, by one ensemble that starts from the prior."""
    settings = sampler_of(fit.analysis.sampler, fit.prior.n_dim, 11)
    result = run_ensemble(fit.posterior.ln_prob, fit.prior.n_dim, settings, 0)
    assert result.stopped, result.reason
    samples = result.samples
    kept = samples[np.linspace(0, len(samples) - 1, 6000).astype(int)]
    return fit.prior.to_parameters(kept)


def flags(fit: Fit, theta: np.ndarray) -> tuple[set[tuple[str, int]], set[str]]:
    """Return flagged rows, and data sets with a flagged test."""
    false_alarm = fit.analysis.checks.false_alarm
    datasets = fit.response.datasets
    loo = leave_one_out(fit.response, theta, np.random.default_rng(1))
    visible = np.concatenate([data.visible for data in datasets])
    names = np.concatenate([np.full(data.n_rows, data.name) for data in datasets])
    rows = np.concatenate([np.arange(data.n_rows) for data in datasets])
    bad = visible & (loo.p_value < row_level(int(visible.sum()), false_alarm))
    table = discrepancy_table(discrepancies(datasets, loo), false_alarm)
    tests = {str(row["dataset"]) for row in table if row["flag"] == "misfit"}
    return {(str(names[i]), int(rows[i])) for i in np.flatnonzero(bad)}, tests


def test_clean_data_raise_no_flag(clean):
    theta = draws(clean)
    rows, tests = flags(clean, theta)
    assert rows == set()
    assert tests == set()


def test_an_outlier_of_four_sigma_is_found(clean):
    def outlier(data):
        observed = data.observed.copy()
        # Four of its errors above where the demo's data put it.
        observed[2] += 4.0 * data.err_hi[2]
        return observed

    fit = changed(clean, "lls_incidence", outlier)
    rows, tests = flags(fit, draws(fit))
    assert ("lls_incidence", 2) in rows
    assert {name for name, _ in rows} | tests == {"lls_incidence"}


def test_a_calibration_error_of_a_fifth_is_found(clean):
    fit = changed(clean, "lya_opacity", lambda data: 1.2 * data.observed)
    theta = draws(fit)
    found = [hold_out(fit, theta, name, [name]) for name in ("lya_opacity", "hi_density")]
    table = {str(row["group"]): row for row in tension_table(found, 0.05)}
    assert table["lya_opacity"]["flag"] == "tension"
    assert table["lya_opacity"]["offset"] > 3.0
    assert table["hi_density"]["flag"] == ""
