"""Figures: data where they were measured, one symbol a data set, units on axes, honest notes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from astropy.table import Table
from numpy.testing import assert_allclose
from scipy.optimize import least_squares

from fogline.chains import EnsembleResult
from fogline.comparison import compare
from fogline.constraint_files import read_constraint_files
from fogline.convergence import assess
from fogline.datasets import DataSet
from fogline.derived import DERIVED_TABLES, Draws
from fogline.evidence import Importance
from fogline.figures import FIGURES, FigureInputs, dataset_styles, draw_comparison, save
from fogline.mixture import StudentMixture
from fogline.predictive import check_predictive, predictive_table
from fogline.priors import Prior
from fogline.response_file import Fit, build_fit
from fogline.settings import AnalysisSettings, analysis_from_plain
from fogline.tables import curve_table

TRUTH = np.array(
    [-9.7, -11.65, -14.3, -16.5, -18.5, -20.15, -21.6, -22.6, -23.75, -26.5, 1.9, 2.0, 0.6]
)
"""A plausible parameter vector for the pivots of `PLAIN_ANALYSIS`."""

NORMAL_15 = {"dist": "norm", "loc": 1.5, "scale": 1.5}

PLAIN_ANALYSIS: dict[str, Any] = {
    "name": "joint",
    "datasets": [],
    "cosmology": {"H0": 70.0, "Om0": 0.3, "Ode0": None},
    "model": {
        "reference_redshift": 2.5,
        "pivots": [12.0, 13.5, 15.0, 16.2, 17.5, 19.0, 20.3, 21.0, 21.6, 22.5],
        "evolution": {"pivots": [14.0, 17.5, 20.3], "priors": [NORMAL_15] * 3},
        "prior": {
            "anchor_log_nhi": 20.3,
            "anchor": {"dist": "norm", "loc": -21.5, "scale": 1.0},
            "slope_kind": "walk",
            "first_slope": {"dist": "norm", "loc": 1.7, "scale": 0.5},
            "slope_step": {"dist": "norm", "loc": 0.0, "scale": 0.5},
        },
        "doppler": {"dist": "fixed", "b": 26.0},
    },
    "sampler": {
        "walkers": 32,
        "ensembles": 2,
        "seed": 1,
        "target_ess": 400,
        "max_rhat": 1.05,
        "max_steps": 1000,
        "thin": 10,
        "warm_up": [10],
        "components": [1],
        "independence_share": 0.5,
    },
    "derive": {
        "redshifts": list(np.round(np.arange(2.0, 5.01, 0.25), 2)),
        "column_redshifts": [2.5, 3.5, 4.5],
        "draws": 200,
    },
}

OURS = {"H0": 70.0, "Om0": 0.3}
OTHER = {"H0": 72.0, "Om0": 0.27}


def error_columns(share: float, n: int) -> dict[str, Any]:
    return {"err": np.full(n, share)}


def study_files() -> dict[str, tuple[dict[str, Any], dict[str, Any], float, str]]:
    """Return meta, key columns, relative error and unit of every data set of the fake study."""
    forest, dla = np.arange(12.5, 14.6, 0.25), np.arange(20.3, 21.9, 0.2)
    bins = {"z": np.full(8, 2.6), "log_nhi_lo": forest[:-1], "log_nhi_hi": forest[1:]}
    counts = {"z_lo": np.full(7, 2.2), "z_hi": np.full(7, 3.8), "path": np.full(7, 600.0)}
    counts |= {"log_nhi_lo": dla[:-1], "log_nhi_hi": dla[1:]}
    sub_dlas = {"z": np.full(3, 3.1), "log_nhi_lo": [19.0, 19.4, 19.8], "path": [80.0] * 3}
    sub_dlas["log_nhi_hi"] = [19.4, 19.8, 20.3]
    bin_edges = np.array([2.0, 2.6, 3.2, 4.0])
    return {
        "forest_flux": (
            {
                "quantity": "lya_opacity",
                "form": "mean_flux",
                "log_nhi_min": 12.0,
                "log_nhi_max": 17.2,
            },
            {"z": np.array([2.1, 2.5, 2.9, 3.3, 3.7])},
            0.02,
            "",
        ),
        "forest_tau": (
            {"quantity": "lya_opacity", "form": "tau", "log_nhi_min": 12.0, "log_nhi_max": 19.0},
            {"z": np.array([3.9, 4.3, 4.7])},
            0.06,
            "",
        ),
        "forest_columns": (
            {"quantity": "column_distribution", "per": "dX", "cosmology": OURS},
            bins,
            0.05,
            "",
        ),
        "dla_counts": (
            {"quantity": "column_distribution", "per": "dX", "cosmology": OTHER},
            counts,
            0.0,
            "",
        ),
        "sub_dla_counts": ({"quantity": "column_distribution", "per": "dz"}, sub_dlas, 0.0, ""),
        "lls_thick": (
            {"quantity": "lls_incidence", "per": "dz", "tau_min": 2.0},
            {"z_lo": bin_edges[:-1], "z_hi": bin_edges[1:], "path": np.array([50.0, 40.0, 15.0])},
            0.0,
            "",
        ),
        "lls_all": (
            {"quantity": "lls_incidence", "per": "dX", "tau_min": 1.0, "cosmology": OTHER},
            {"z": np.array([2.4, 3.5, 4.2])},
            0.15,
            "",
        ),
        "path_local": (
            {
                "quantity": "mean_free_path",
                "definition": "local",
                "frame": "proper",
                "cosmology": OTHER,
            },
            {"z": np.array([2.44, 3.8, 4.2, 4.6])},
            0.1,
            "Mpc / littleh",
        ),
        "path_unit": (
            {
                "quantity": "mean_free_path",
                "definition": "unit_depth",
                "frame": "proper",
                "cosmology": OURS,
            },
            {"z": np.array([3.0, 3.5, 4.0])},
            0.1,
            "Mpc",
        ),
        "dla_density": (
            {
                "quantity": "hi_density",
                "form": "omega_gas",
                "helium_factor": 1.3,
                "log_nhi_min": 20.3,
                "cosmology": OTHER,
            },
            {"z_lo": np.array([2.2, 2.8, 3.4]), "z_hi": np.array([2.8, 3.4, 4.4])},
            0.12,
            "",
        ),
    }


def write_study(folder: Path, values: Mapping[str, np.ndarray] | None = None) -> list[str]:
    """Write the constraint files, with placeholder values where none are given."""
    paths = []
    for name, (meta, keys, error, unit) in study_files().items():
        table = Table({key: np.asarray(column, float) for key, column in keys.items()})
        n, log_f = len(table), meta["quantity"] == "column_distribution"
        given = values[name] if values else np.full(n, -20.0 if log_f else 0.5)
        if "path" in keys:
            table["count"] = given.astype(int) if values else np.full(n, 1)
        else:
            column = "log_f" if log_f else "value"
            table[column] = given
            table["err"] = np.full(n, error) if log_f else error * np.abs(given)
            for key in (column, "err"):
                table[key].unit = unit or None
        if name == "lls_all":
            table["limit"] = ["", "", "upper"]
        table.meta = {"source": "invented", **meta}
        paths.append(str(folder / f"{name}.ecsv"))
        table.write(paths[-1], format="ascii.ecsv", overwrite=True)
    return paths


def invented_values(fit: Fit, rng: np.random.Generator) -> dict[str, np.ndarray]:
    """Draw data from the truth."""
    predicted = fit.response.predict(TRUTH)
    out = {}
    for data, rows in zip(fit.response.datasets, fit.response.slices, strict=True):
        mean, error = predicted[rows], study_files()[data.name][2]
        scale = error if data.quantity == "column_distribution" else error * mean
        noisy = mean + scale * rng.standard_normal(len(mean))
        out[data.name] = rng.poisson(mean) if data.counts else noisy
    out["dla_counts"][-1] = 0  # a count of nothing is shown as a limit
    return out


def laplace(fit: Fit) -> tuple[np.ndarray, np.ndarray]:
    """Return centre and covariance of the posterior near the truth, in unit-normal coordinates."""
    prior, posterior = Prior(fit.analysis.model), fit.posterior

    def pulls(x: np.ndarray) -> np.ndarray:
        theta = prior.to_parameters(x[None])
        predicted = fit.response.predict(theta)
        seen = posterior.likelihood.observed
        data = posterior.likelihood.standardize(seen, predicted)[0]
        return np.concatenate([x, np.clip(np.nan_to_num(data), -9.0, 9.0)])

    start = least_squares(lambda x: prior.to_parameters(x[None])[0] - TRUTH, np.zeros(prior.n_dim))
    found = least_squares(pulls, start.x)
    return found.x, np.linalg.inv(found.jac.T @ found.jac)


def fake_ensembles(fit: Fit, rng: np.random.Generator, n_steps: int = 60) -> list[EnsembleResult]:
    """Return independent draws of the Laplace approximation, dressed as ensembles."""
    centre, covariance = laplace(fit)
    walkers, n_dim = fit.analysis.sampler.walkers, len(centre)
    factor, sd = np.linalg.cholesky(covariance), np.sqrt(np.diagonal(covariance))
    importance = Importance(-10.0, 0.01, 0.5, 0.3, 9999, centre, sd, 0.05 * sd, 0.05 * sd / sd)
    mixture = StudentMixture(np.ones(1), centre[None], factor[None])
    return [
        EnsembleResult(
            chain=centre + rng.standard_normal((n_steps, walkers, n_dim)) @ factor.T,
            ln_prob=np.zeros((n_steps, walkers)),
            steps=10 * n_steps,
            thin=10,
            warm_up=10,
            acceptance={"stretch": 0.3},
            walker_acceptance=np.full(walkers, 0.3),
            mixture=mixture,
            history=np.zeros((1, 5)),
            stopped=True,
            reason="target met",
            seed=1,
            index=index,
            importance=importance,
        )
        for index in range(2)
    ]


def fake_study(folder: Path, n_draws: int = 200, **derive: Any) -> FigureInputs:
    """Return figure inputs of invented data, with real tables and a Laplace posterior."""
    rng = np.random.default_rng(20)
    analysis: AnalysisSettings = analysis_from_plain(PLAIN_ANALYSIS)
    analysis = replace(analysis, derive=replace(analysis.derive, **derive))
    fit = build_fit(analysis, read_constraint_files(write_study(folder)))
    datasets = read_constraint_files(write_study(folder, invented_values(fit, rng)))
    fit = build_fit(analysis, datasets)
    prior = Prior(analysis.model)
    ensembles = fake_ensembles(fit, rng)
    samples = np.concatenate([e.samples for e in ensembles])
    theta = prior.to_parameters(rng.choice(samples, n_draws, replace=False))
    draws = Draws(theta, fit.setting, analysis.derive)
    tables = {
        name: curve_table(derived.keys(draws), derived.curves(draws), with_bands=True)
        for name, derived in DERIVED_TABLES.items()
    }
    check = check_predictive(fit.response, theta, rng)
    tables["predictive"] = predictive_table(fit.response.datasets, check)
    names = fit.setting.distribution.names
    return FigureInputs(
        fit=fit,
        tables=tables,
        theta=theta,
        prior_theta=prior.to_parameters(rng.standard_normal((4000, prior.n_dim))),
        convergence=assess(ensembles, analysis.sampler, names).as_dict(),
        ensembles=ensembles,
    )
