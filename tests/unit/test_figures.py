"""Figures: data where they were measured, one symbol a data set, units on axes, honest notes."""

from __future__ import annotations

import copy
import json
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import matplotlib
import numpy as np
import pytest
from astropy.table import Table
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Rectangle
from matplotlib.text import Text
from numpy.testing import assert_allclose
from scipy.integrate import quad
from scipy.optimize import least_squares

from fogline import plan
from fogline.chains import EnsembleResult
from fogline.changes import changes
from fogline.comparison import compare
from fogline.constraint_files import read_constraint_files
from fogline.convergence import assess
from fogline.datasets import DataSet
from fogline.derived import DERIVED_TABLES, Draws
from fogline.evidence import Importance
from fogline.faults import InputError
from fogline.figures import FIGURES, FigureInputs, dataset_styles, draw_comparison, save
from fogline.figures.axis import unmeasured_columns
from fogline.figures.column_distribution import to_log_f
from fogline.figures.comparison import draw_changes
from fogline.figures.data_points import along_columns, along_z, poisson_interval
from fogline.figures.lya_opacity import to_tau
from fogline.figures.overlays import draw_overlays
from fogline.inputs import with_nuisances
from fogline.mixture import StudentMixture
from fogline.response_file import Fit, build_fit
from fogline.settings import AnalysisSettings, analysis_from_plain
from fogline.tables import curve_table, read_table, write_table
from fogline.trust.discrepancies import discrepancies, discrepancy_table
from fogline.trust.information_tables import information_tables
from fogline.trust.predictive import check_predictive, predictive_table

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
        "forest_beta": (
            {
                "quantity": "lyman_series_opacity",
                "line": "beta",
                "foreground": "removed",
                "form": "decrement",
                "log_nhi_min": 12.0,
                "log_nhi_max": 17.2,
            },
            {"z": np.array([2.6, 3.0, 3.4])},
            0.08,
            "",
        ),
        "composite": (
            {"quantity": "continuum_flux", "lines": "included", "reference_wavelength": 920.0},
            {
                "z": np.full(4, 3.6),
                "wavelength_lo": [850.0, 870.0, 890.0, 905.0],
                "wavelength_hi": [870.0, 890.0, 905.0, 911.0],
            },
            0.05,
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
        for key in keys:
            if key.startswith("wavelength"):
                table[key].unit = "Angstrom"
        table.meta = {"source": "invented", **meta}
        paths.append(str(folder / f"{name}.ecsv"))
        table.write(paths[-1], format="ascii.ecsv", overwrite=True)
    return paths


def invented_values(
    fit: Fit, rng: np.random.Generator, truth: np.ndarray = TRUTH
) -> dict[str, np.ndarray]:
    """Draw data from the truth."""
    predicted = fit.response.predict(truth)
    out = {}
    for data, rows in zip(fit.response.datasets, fit.response.slices, strict=True):
        mean, error = predicted[rows], study_files()[data.name][2]
        scale = error if data.quantity == "column_distribution" else error * mean
        noisy = mean + scale * rng.standard_normal(len(mean))
        out[data.name] = rng.poisson(mean) if data.counts else noisy
    out["dla_counts"][-1] = 0  # a count of nothing is shown as a limit
    return out


def laplace(fit: Fit, truth: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return centre and covariance of the posterior near the truth, in unit-normal coordinates."""
    posterior = fit.posterior
    prior = posterior.prior

    def pulls(x: np.ndarray) -> np.ndarray:
        theta = prior.to_parameters(x[None])
        predicted = fit.response.predict(theta)
        nuisances = theta[:, fit.response.n_parameters :]
        seen = posterior.likelihood.observed
        data = posterior.likelihood.standardize(seen, predicted, nuisances)[0]
        return np.concatenate([x, np.clip(np.nan_to_num(data), -9.0, 9.0)])

    start = least_squares(lambda x: prior.to_parameters(x[None])[0] - truth, np.zeros(prior.n_dim))
    found = least_squares(pulls, start.x)
    return found.x, np.linalg.inv(found.jac.T @ found.jac)


def fake_ensembles(
    fit: Fit, rng: np.random.Generator, truth: np.ndarray, n_steps: int = 80
) -> list[EnsembleResult]:
    """Return independent draws of the Laplace approximation, dressed as ensembles."""
    centre, covariance = laplace(fit, truth)
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
            history=np.zeros((1, 6)),
            stopped=True,
            reason="target met",
            seed=1,
            index=index,
            importance=importance,
        )
        for index in range(2)
    ]


def fake_study(
    folder: Path,
    plain: Mapping[str, Any] = PLAIN_ANALYSIS,
    truth: np.ndarray = TRUTH,
    n_draws: int = 200,
    **derive: Any,
) -> FigureInputs:
    """Return figure inputs of invented data, with real tables and a Laplace posterior."""
    rng = np.random.default_rng(20)
    analysis: AnalysisSettings = analysis_from_plain(plain)
    analysis = replace(analysis, derive=replace(analysis.derive, **derive))
    fit = build_fit(analysis, read_constraint_files(write_study(folder)))
    files = write_study(folder, invented_values(fit, rng, truth))
    datasets = with_nuisances(read_constraint_files(files), analysis)
    fit = build_fit(analysis, datasets)
    prior = fit.posterior.prior
    ensembles = fake_ensembles(fit, rng, truth)
    samples = np.concatenate([e.samples for e in ensembles])
    x = rng.choice(samples, n_draws, replace=False)
    theta = prior.to_parameters(x)
    draws = Draws(theta, fit.setting, analysis.derive)
    tables = {
        name: curve_table(derived.keys(draws), derived.curves(draws), with_bands=True)
        for name, derived in DERIVED_TABLES.items()
    }
    check = check_predictive(fit.response, theta, rng)
    tables["predictive"] = predictive_table(fit.response.datasets, check)
    found = discrepancies(fit.response.datasets, check.loo)
    tables["discrepancies"] = discrepancy_table(found, 0.05)
    tables |= information_tables(
        fit.posterior, x, theta, lambda t: Draws(t, fit.setting, analysis.derive)
    )
    # As the figures get them: a file turns empty strings into masked ones, for instance.
    for name, table in tables.items():
        write_table(table, folder / "tables" / f"{name}.ecsv")
    tables = {name: read_table(folder / "tables" / f"{name}.ecsv") for name in tables}
    names = prior.names
    report = assess(ensembles, analysis.sampler, names, to_parameters=prior.to_parameters)
    return FigureInputs(
        fit=fit,
        tables=tables,
        theta=theta,
        prior_theta=prior.to_parameters(rng.standard_normal((4000, prior.n_dim))),
        convergence=json.loads(json.dumps(report.as_dict())),
        ensembles=ensembles,
    )


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> FigureInputs:
    return fake_study(tmp_path_factory.mktemp("study"))


@pytest.fixture(scope="module")
def figures(study: FigureInputs) -> dict[str, Figure]:
    assert study.converged, study.convergence["reasons"]
    return {name: draw(study) for name, draw in FIGURES.items()}


def dataset(study: FigureInputs, name: str) -> DataSet:
    return next(data for data in study.fit.response.datasets if data.name == name)


def lines(figure: Figure, gid: str) -> list[Line2D]:
    return [line for line in figure.findobj(Line2D) if line.get_gid() == gid]


def drawn_at(figure: Figure, gid: str) -> np.ndarray:
    """Return the positions of the one line with this mark, shape (n, 2)."""
    (line,) = lines(figure, gid)
    return np.asarray(line.get_xydata())


def texts(figure: Figure) -> str:
    return "\n".join(text.get_text() for text in figure.findobj(Text))


def test_the_workflow_and_the_package_name_the_same_figures() -> None:
    assert tuple(FIGURES) == plan.FIGURES


@pytest.mark.parametrize("name", FIGURES)
def test_every_figure_is_written_in_both_forms(
    name: str, figures: dict[str, Figure], tmp_path: Path
) -> None:
    save(figures[name], tmp_path / name)
    assert (tmp_path / f"{name}.png").read_bytes().startswith(b"\x89PNG")
    assert (tmp_path / f"{name}.pdf").read_bytes().startswith(b"%PDF")
    assert sorted(path.name for path in tmp_path.iterdir()) == [f"{name}.pdf", f"{name}.png"]


def test_the_same_figure_gives_the_same_files(study: FigureInputs, tmp_path: Path) -> None:
    for name in ("a", "b"):
        save(FIGURES["lya_opacity"](study), tmp_path / name)
    for form in ("pdf", "png"):
        first, second = ((tmp_path / f"{copy}.{form}").read_bytes() for copy in ("a", "b"))
        assert first == second


def test_drawing_leaves_the_callers_settings_alone(study: FigureInputs) -> None:
    with matplotlib.rc_context({"font.size": 31.0}):
        before = dict(matplotlib.rcParams)
        figure = FIGURES["lya_opacity"](study)
        assert dict(matplotlib.rcParams) == before
    assert figure.axes[0].xaxis.label.get_fontsize() < 12.0


UNITS = {
    "column_distribution": (["cm}^2", "[dex]"], "cm}^{-2}"),
    "lya_opacity": (["tau_\\mathrm{eff}"], "redshift"),
    "lls_incidence": (["per unit $z$", "per unit $X$"], "redshift"),
    "mean_free_path": (["[proper Mpc]"], "redshift"),
    "hi_density": (["M_\\odot\\,\\mathrm{Mpc}^{-3}", "share"], "redshift"),
    "opacity_budget": (["dex$^{-1}$", "share below"], "cm}^{-2}"),
}
"""What the y labels of each figure's panels and its lowest x label must say."""


@pytest.mark.parametrize("name", UNITS)
def test_axes_carry_quantity_and_unit(name: str, figures: dict[str, Figure]) -> None:
    wanted_y, wanted_x = UNITS[name]
    panels = figures[name].axes
    assert len(panels) == len(wanted_y)
    for axes, wanted in zip(panels, wanted_y, strict=True):
        assert wanted in axes.get_ylabel()
    assert wanted_x in panels[-1].get_xlabel()


@pytest.mark.parametrize("name", FIGURES)
def test_print_is_large_enough(name: str, figures: dict[str, Figure]) -> None:
    # The corner figure's tick labels are the exception: 13 panels share the width of a page.
    smallest = 5.5 if name == "corner" else 7.0
    sizes = [t.get_fontsize() for t in figures[name].findobj(Text) if t.get_text().strip()]
    assert min(sizes) >= smallest


def test_measurements_stand_where_the_file_has_them(
    study: FigureInputs, figures: dict[str, Figure]
) -> None:
    data = dataset(study, "path_unit")
    at = drawn_at(figures["mean_free_path"], "data:path unit")
    assert_allclose(at, np.column_stack([data.z, data.observed]))


def test_lengths_over_h_are_brought_to_mpc_with_the_files_own_h(
    study: FigureInputs, figures: dict[str, Figure]
) -> None:
    data = dataset(study, "path_local")
    at = drawn_at(figures["mean_free_path"], "data:path local")
    assert_allclose(at[:, 1], data.observed / 0.72)  # x Mpc/h is x / h Mpc
    predicted = drawn_at(figures["mean_free_path"], "prediction:path local")
    assert_allclose(predicted[:, 1], study.predicted(data)[1] / 0.72)


def test_mean_flux_is_shown_as_its_own_optical_depth(
    study: FigureInputs, figures: dict[str, Figure]
) -> None:
    data = dataset(study, "forest_flux")
    at = drawn_at(figures["lya_opacity"], "data:forest flux")
    assert_allclose(at, np.column_stack([data.z, -np.log(data.observed)]))
    assert r"forest flux ($-\ln F$)" in texts(figures["lya_opacity"])
    points = along_z(data, to_tau(data))
    assert_allclose(points.y_hi, -np.log(data.observed - data.err_lo))
    assert_allclose(points.y_lo, -np.log(data.observed + data.err_hi))


def test_higher_lines_stand_beside_lya_as_open_symbols(
    study: FigureInputs, figures: dict[str, Figure]
) -> None:
    data = dataset(study, "forest_beta")
    (line,) = lines(figures["lya_opacity"], "data:forest beta")
    assert_allclose(line.get_xydata(), np.column_stack([data.z, -np.log1p(-data.observed)]))
    assert line.get_markerfacecolor() == "white"
    predicted = drawn_at(figures["lya_opacity"], "prediction:forest beta")
    assert_allclose(predicted[:, 1], -np.log1p(-study.predicted(data)[1]))


def test_composite_stands_below_the_curves_with_its_own_prediction(
    study: FigureInputs, figures: dict[str, Figure]
) -> None:
    data = dataset(study, "composite")
    assert data.wavelength_lo is not None
    assert data.wavelength_hi is not None
    curves, composites = figures["transmission"].axes
    assert "observed wavelength" in curves.get_xlabel()
    assert "rest wavelength" in composites.get_xlabel()
    middle = 0.5 * (data.wavelength_lo + data.wavelength_hi)
    for mark, y in (("data", data.observed), ("prediction", study.predicted(data)[1])):
        drawn = drawn_at(figures["transmission"], f"{mark}:composite")
        assert_allclose(drawn, np.column_stack([middle, y]))


def test_an_upper_limit_of_the_flux_is_a_lower_one_of_the_depth(study: FigureInputs) -> None:
    data = dataset(study, "forest_flux")
    limited = replace(data, limit=np.array([1, -1, 0, 0, 0]))
    assert along_z(limited, to_tau(limited)).limit.tolist() == [-1, 1, 0, 0, 0]
    assert along_z(limited, lambda flux: flux).limit.tolist() == [1, -1, 0, 0, 0]


def test_counts_are_shown_over_their_path(study: FigureInputs, figures: dict[str, Figure]) -> None:
    data = dataset(study, "lls_thick")
    at = drawn_at(figures["lls_incidence"], "data:lls thick")
    assert_allclose(at, np.column_stack([data.z, data.observed / data.search_path]))


def test_poisson_errors_are_those_of_tables() -> None:
    # Gehrels 1986, ApJ 303, 336, tables 1 and 2, CL 0.8413 (from memory): n = 0, 1, 5.
    lo, hi = poisson_interval(np.array([0.0, 1.0, 5.0]))
    assert_allclose(hi, [1.841, 3.300, 8.382], atol=1e-3)
    assert_allclose(lo, [0.0, 0.173, 2.840], atol=1e-3)


def test_a_count_of_nothing_is_an_upper_limit(study: FigureInputs) -> None:
    data = dataset(study, "dla_counts")
    points = along_columns(data, to_log_f(data))
    assert points.limit.tolist() == [0] * 6 + [1]
    width = 10.0 ** data.log_nhi_hi[-1] - 10.0 ** data.log_nhi_lo[-1]
    # 95%: exp(-mean) = 0.05
    assert_allclose(points.y[-1], np.log10(-np.log(0.05) / (600.0 * width)))


def test_log_f_and_residuals_stand_at_the_bins(
    study: FigureInputs, figures: dict[str, Figure]
) -> None:
    data = dataset(study, "forest_columns")
    main, residual = lines(figures["column_distribution"], "data:forest columns")
    middle = 0.5 * (data.log_nhi_lo + data.log_nhi_hi)
    assert_allclose(main.get_xydata(), np.column_stack([middle, data.observed]))
    expected = data.observed - study.predicted(data)[1]
    assert_allclose(residual.get_xydata(), np.column_stack([middle, expected]))


def test_bins_per_redshift_are_held_against_their_own_prediction_only(
    figures: dict[str, Figure],
) -> None:
    main, residual = figures["column_distribution"].axes
    (line,) = lines(figures["column_distribution"], "data:sub dla counts")
    assert line.axes is residual
    assert "per d$z$: below only" in texts(figures["column_distribution"])
    assert main.get_legend() is not None


def test_gas_densities_lose_their_helium_and_nothing_else(
    study: FigureInputs, figures: dict[str, Figure]
) -> None:
    data = dataset(study, "dla_density")
    at = drawn_at(figures["hi_density"], "data:dla density")
    # rho_crit = 3 H0^2 / (8 pi G) = 2.7754e11 h^2 Msun / Mpc3
    expected = data.observed / 1.3 * 2.7754e11 * 0.72**2 / 1e8
    assert_allclose(at[:, 1], expected, rtol=2e-4)


@pytest.mark.parametrize(
    ("figure", "name", "note"),
    [
        ("lya_opacity", "forest tau", r"$\log N = 12$–$19$"),
        ("lya_opacity", "forest beta", r"Ly$\beta$"),
        ("lls_incidence", "lls all", "$H_0 = 72$"),
        ("mean_free_path", "path local", "$H_0 = 72$"),
        ("hi_density", "dla density", r"$\log N \geq 20.3$"),
    ],
)
def test_another_convention_is_named_and_has_its_own_prediction(
    figure: str, name: str, note: str, study: FigureInputs, figures: dict[str, Figure]
) -> None:
    (label,) = [t for t in texts(figures[figure]).splitlines() if t.startswith(f"{name} (")]
    assert note in label
    data = dataset(study, name.replace(" ", "_"))
    assert_allclose(drawn_at(figures[figure], f"prediction:{name}")[:, 0], data.z)


@pytest.mark.parametrize(
    ("figure", "name"), [("lya_opacity", "forest flux"), ("mean_free_path", "path unit")]
)
def test_the_curves_own_convention_needs_no_prediction(
    figure: str, name: str, figures: dict[str, Figure]
) -> None:
    assert not lines(figures[figure], f"prediction:{name}")


def test_definitions_of_the_free_path_differ_in_fill_and_line(figures: dict[str, Figure]) -> None:
    figure = figures["mean_free_path"]
    (local,), (unit) = lines(figure, "data:path local"), lines(figure, "data:path unit")
    assert local.get_markerfacecolor() == local.get_color()
    assert unit[0].get_markerfacecolor() == "white"
    curves = {line.get_label(): line.get_linestyle() for line in figure.axes[0].lines}
    assert curves["local: inverse opacity"] == "-"
    assert curves["unit depth: flux falls to $1/e$"] == "--"


def test_a_data_set_looks_the_same_in_every_figure(
    study: FigureInputs, figures: dict[str, Figure]
) -> None:
    styles = dataset_styles(study.fit)
    looks = {(style.colour, style.marker) for style in styles.values()}
    assert len(looks) == len(styles) == len(study.fit.response.datasets)
    for style in styles.values():
        found = [
            line
            for figure in figures.values()
            for line in lines(figure, f"data:{style.label}")
            if len(line.get_xdata())
        ]
        assert len(found) >= 2  # its own figure and the pulls
        assert {(line.get_color(), line.get_marker()) for line in found} == {
            (style.colour, style.marker)
        }


def test_styles_stay_unique_for_many_data_sets(study: FigureInputs) -> None:
    many = [replace(study.fit.response.datasets[0], name=f"set_{i}") for i in range(40)]
    response = replace(study.fit.response, datasets=tuple(many))
    styles = dataset_styles(replace(study.fit, response=response))
    assert len({(style.colour, style.marker) for style in styles.values()}) == 40


def test_pulls_are_those_of_the_table(study: FigureInputs, figures: dict[str, Figure]) -> None:
    table = study.tables["predictive"]
    drawn = [line for line in figures["pulls"].findobj(Line2D) if line.get_gid()]
    assert_allclose(
        np.sort(np.concatenate([line.get_xdata() for line in drawn])), np.sort(table["pull"])
    )
    p_value = table.meta["datasets"]["forest_flux"]["p_value"]
    assert f"$p = {p_value:.3f}$" in texts(figures["pulls"])
    assert "Red rings" not in texts(figures["pulls"])


def test_rows_outside_the_replicates_are_ringed(study: FigureInputs) -> None:
    table = study.tables["predictive"].copy()
    table["flag"] = ["outside" if i == 3 else "" for i in range(len(table))]
    figure = FIGURES["pulls"](replace(study, tables={**study.tables, "predictive": table}))
    assert "Red rings" in texts(figure)
    rings = [line for line in figure.findobj(Line2D) if line.get_markersize() == 8.0]
    assert_allclose(np.concatenate([line.get_xdata() for line in rings]), [table["pull"][3]])


def test_columns_without_bins_are_shaded(study: FigureInputs, figures: dict[str, Figure]) -> None:
    gaps = unmeasured_columns(study)
    assert_allclose(gaps, [(12.0, 12.5), (14.5, 19.0), (21.7, 22.5)])
    for name in ("column_distribution", "opacity_budget", "prior_posterior"):
        spans = [p for p in figures[name].axes[0].patches if isinstance(p, Rectangle)]
        assert_allclose([(p.get_x(), p.get_x() + p.get_width()) for p in spans], gaps)
        assert "prior and integral constraints only" in texts(figures[name]).replace("\n", " ")


def test_corner_has_a_panel_for_every_pair(study: FigureInputs, figures: dict[str, Figure]) -> None:
    n = study.theta.shape[1]
    assert len(figures["corner"].axes) == n * n
    assert len({axes.get_xlabel() for axes in figures["corner"].axes[-n:]}) == n


def test_convergence_shows_the_numbers_of_the_report(
    study: FigureInputs, figures: dict[str, Figure]
) -> None:
    bulk = drawn_at(figures["convergence"], "ess_bulk")
    assert_allclose(bulk[:, 1], [p["ess_bulk"] for p in study.convergence["parameters"]])
    title = figures["convergence"].get_suptitle()
    assert title == "converged"


def test_what_has_not_converged_says_so_on_every_figure(study: FigureInputs) -> None:
    verdict = {**study.convergence, "converged": False, "reasons": ["R-hat is not below 1.01"]}
    unconverged = replace(study, convergence=verdict)
    for name, draw in FIGURES.items():
        notes = [t for t in draw(unconverged).findobj(Text) if "not converged" in t.get_text()]
        assert [note.get_color() for note in notes] == ["#c00000"], name
        if name == "convergence":
            assert "R-hat is not below 1.01" in notes[0].get_text()


@pytest.mark.parametrize("name", ["hi_density", "mean_free_path"])
def test_the_warning_stands_clear_of_the_legend(name: str, study: FigureInputs) -> None:
    verdict = {**study.convergence, "converged": False}
    figure = FIGURES[name](replace(study, convergence=verdict))
    figure.draw_without_rendering()
    (note,) = [t for t in figure.findobj(Text) if t.get_text() == "not converged"]
    entries = [text.get_window_extent() for text in figure.legends[0].get_texts()]
    assert not any(note.get_window_extent().overlaps(entry) for entry in entries)


def test_a_report_with_holes_can_be_drawn(study: FigureInputs) -> None:
    # JSON has null where R-hat or an autocorrelation time is infinite.
    parameters = [dict(p) for p in study.convergence["parameters"]]
    parameters[4]["rhat"] = None
    autocorrelation = [dict(e) for e in study.convergence["autocorrelation"]]
    autocorrelation[0]["time"] = [None] * len(autocorrelation[0]["time"])
    verdict = {"converged": False, "reasons": [], "parameters": parameters}
    verdict["autocorrelation"] = autocorrelation
    figure = FIGURES["convergence"](replace(study, convergence=verdict))
    assert r"$\log f_{17.5}$" in [axes.get_ylabel() for axes in figure.axes]
    assert drawn_at(figure, "rhat:infinite")[:, 0].tolist() == [4.0]


def test_no_data_of_a_quantity_leaves_its_curve(study: FigureInputs, tmp_path: Path) -> None:
    response = study.fit.response
    few = replace(
        response, datasets=response.datasets[2:3], blocks=response.blocks[2:3]
    )  # forest_columns
    bare = replace(study, fit=replace(study.fit, response=few))
    for name in ("lya_opacity", "lls_incidence", "mean_free_path", "hi_density"):
        save(FIGURES[name](bare), tmp_path / name)


def test_listed_absorbers_stand_as_counts_over_their_path(
    study: FigureInputs, tmp_path: Path
) -> None:
    rows = Table(
        {"z": [3.1, 3.4, 3.5, 3.9], "log_nhi": [20.35, 20.5, 21.1, 22.1], "err": [0.1] * 4}
    )
    rows.meta = {
        "quantity": "absorber_list",
        "source": "invented",
        "survey_path": "path.ecsv",
        "log_nhi_min": 20.3,
        "log_nhi_max": 22.3,
    }
    rows.write(tmp_path / "listed.ecsv", format="ascii.ecsv")
    path = Table({"z_start": [3.0, 3.2], "z_end": [4.0, 3.8]})
    path.meta = {"kind": "sightlines", "source": "invented"}
    path.write(tmp_path / "path.ecsv", format="ascii.ecsv")
    datasets = [*study.fit.response.datasets, *read_constraint_files([tmp_path / "listed.ecsv"])]
    fit = build_fit(study.fit.analysis, datasets)
    listed = replace(study, fit=fit)
    assert_allclose(unmeasured_columns(listed)[-1], (22.3, 22.5))
    figure = FIGURES["column_distribution"](listed)
    main, residual = (np.asarray(line.get_xydata()) for line in lines(figure, "data:listed"))
    # dX/dz of flat ΛCDM (Bahcall & Peebles 1969), integrated along both sightlines.
    per_z = lambda z: (1.0 + z) ** 2 / np.sqrt(0.3 * (1.0 + z) ** 3 + 0.7)  # noqa: E731
    path_x = quad(per_z, 3.0, 4.0)[0] + quad(per_z, 3.2, 3.8)[0]
    assert_allclose(main[:, 0], np.arange(20.4, 22.3, 0.2))
    counts = np.array([1, 1, 0, 0, 1, 0, 0, 0, 0, 1])
    some = counts > 0
    expected = np.log10(
        counts[some] / path_x / (10.0 ** (main[some, 0] + 0.1) - 10.0 ** (main[some, 0] - 0.1))
    )
    assert_allclose(main[some, 1], expected, rtol=1e-6)
    predicted = np.median(fit.response.predict(study.theta)[:, -10:], axis=0)
    assert_allclose(residual[some, 1], np.log10(counts[some] / predicted[some]), atol=2e-3)


def test_every_figure_of_a_wider_model(tmp_path: Path) -> None:
    plain = copy.deepcopy(PLAIN_ANALYSIS)
    model = plain["model"]
    model["pivots"] = model["pivots"][:8]
    model["evolution"]["breaks"] = [3.2]
    model["high_column"] = {
        "form": "gamma",
        "top": 22.5,
        "priors": [
            {"dist": "norm", "loc": 1.5, "scale": 0.3},
            {"dist": "norm", "loc": 21.5, "scale": 0.3},
        ],
    }
    plain["nuisances"] = {"forest_flux": {"scale": {"dist": "norm", "loc": 1.0, "scale": 0.05}}}
    truth = np.array([*TRUTH[:8], *TRUTH[10:], *TRUTH[10:], 1.6, 21.6, 1.0])
    wide = fake_study(tmp_path, plain, truth)
    assert wide.converged, wide.convergence["reasons"]
    for name, draw in FIGURES.items():
        save(draw(wide), tmp_path / name)
    names = wide.fit.posterior.prior.names
    assert len(FIGURES["corner"](wide).axes) >= len(names) * (len(names) + 1) // 2
    # The curve goes on through the form, where no pivot stands.
    figure = FIGURES["column_distribution"](wide)
    assert figure.axes[0].get_xlim() == (12.0, 22.5)


def test_a_free_path_beyond_reach_runs_off_the_axis(study: FigureInputs, tmp_path: Path) -> None:
    table = study.tables["mean_free_path"].copy()
    for end in ("hi68", "hi95"):
        table[f"unit_depth_{end}"][:2] = np.inf
    table["unit_depth_median"][0] = np.inf
    figure = FIGURES["mean_free_path"](
        replace(study, tables={**study.tables, "mean_free_path": table})
    )
    save(figure, tmp_path / "path")
    assert "beyond reach" in texts(figure)
    assert np.isfinite(figure.axes[0].get_ylim()).all()


def shifted(tables: Mapping[str, Table], sigmas: float) -> dict[str, Table]:
    """Return tables with every median moved by a number of half 68% widths."""
    out = {name: table.copy() for name, table in tables.items()}
    for table in out.values():
        for column in [c for c in table.colnames if c.endswith("median")]:
            lo, hi = (column.replace("median", end) for end in ("lo68", "hi68"))
            step = sigmas * 0.5 * (np.asarray(table[hi]) - np.asarray(table[lo]))
            for name in (column, lo, hi):
                table[name] = np.asarray(table[name]) + step
    return out


def test_comparison_states_shifts_in_units_of_both_errors(study: FigureInputs) -> None:
    derived = {name: study.tables[name] for name in DERIVED_TABLES}
    table = compare({"joint": derived, "same": derived, "moved": shifted(derived, 3.0)})
    assert set(table["reference"]) == {"joint"}
    same = table[table["analysis"] == "same"]
    moved = table[table["analysis"] == "moved"]
    assert_allclose(same["shift_sigma"], 0.0)
    # Equal errors in quadrature are sqrt(2) of one.
    assert_allclose(moved["shift_sigma"], 3.0 / np.sqrt(2.0))
    assert {"tau_eff", "rho_hi", "lx_dla", "log_f[15]"} <= set(moved["quantity"])
    assert "do not share" in table.meta["definition"]
    # With errors of differences at hand they are used, and no others.
    known = {
        "same": {},
        "moved": {(row["quantity"], row["z"]): 0.5 * row["difference_sigma"] for row in moved},
    }
    again = compare(
        {"joint": derived, "same": derived, "moved": shifted(derived, 3.0)}, None, known
    )
    assert_allclose(
        again[again["analysis"] == "moved"]["shift_sigma"], 2.0 * moved["shift_sigma"], rtol=1e-9
    )
    assert np.isnan(again[again["analysis"] == "same"]["shift_sigma"]).all()


def test_comparison_holds_the_evidences(study: FigureInputs) -> None:
    derived = {name: study.tables[name] for name in DERIVED_TABLES}
    evidences = {"joint": (-10.0, 0.1), "other": (-12.5, 0.2)}
    table = compare({"joint": derived, "other": derived}, evidences)
    (row,) = table[table["quantity"] == "ln_evidence"]
    assert row["analysis"] == "other"
    assert (row["median"], row["reference_median"]) == (-12.5, -10.0)
    assert (row["lo68"], row["hi68"]) == (-12.7, -12.3)
    assert np.isnan(row["shift_sigma"])


def test_comparison_of_what_is_beyond_reach_has_no_shift(study: FigureInputs) -> None:
    derived = {name: study.tables[name] for name in DERIVED_TABLES}
    beyond = shifted(derived, 1.0)
    beyond["mean_free_path"]["unit_depth_hi68"][:] = np.inf
    table = compare({"joint": derived, "beyond": beyond})
    rows = table[table["quantity"] == "mean_free_path_unit_depth"]
    assert np.isnan(rows["shift_sigma"]).all()


def test_comparison_figure_shows_every_analysis(study: FigureInputs, tmp_path: Path) -> None:
    derived = {name: study.tables[name] for name in DERIVED_TABLES}
    table = compare(
        {"joint": derived, "low": shifted(derived, -1.0), "high": shifted(derived, 2.0)}
    )
    figure = draw_comparison(table)
    save(figure, tmp_path / "shifts")
    (axes,) = figure.axes
    drawn = {line.get_label(): np.asarray(line.get_xdata()) for line in axes.lines}
    for name in ("low", "high"):
        rows = table[np.asarray(table["analysis"]) == name]
        assert_allclose(drawn[name], rows["shift_sigma"])
    assert r"[$\sigma$]" in axes.get_xlabel()
    assert "error of the difference" in texts(figure).replace("\n", " ")


def test_comparison_of_one_analysis_is_refused(study: FigureInputs) -> None:
    table = compare({"joint": {name: study.tables[name] for name in DERIVED_TABLES}})
    assert len(table) == 0
    with pytest.raises(ValueError, match="nothing to compare"):
        draw_comparison(table)


def test_overlays_draw_every_analysis_and_name_what_is_not_there(study: FigureInputs) -> None:
    derived = {name: study.tables[name] for name in DERIVED_TABLES}
    results = {"joint": derived, "moved": shifted(derived, 1.0)}
    figure = draw_overlays(results, ["column_distribution", "incidence/lx_dla", "lya_opacity"])
    assert len(figure.axes) == 3
    first, second = figure.axes[0].lines[:2]
    assert_allclose(first.get_ydata(), 0.0)
    assert (np.asarray(second.get_ydata()) > 0.0).all()  # the second less the first
    assert figure.axes[1].get_ylabel() == r"$\ell(X)$, DLAs"
    for overlay, words in (
        ("incidense/lx_dla", "names no derived table; did you mean 'incidence'"),
        ("incidence/lx_dlas", "names no curve of incidence; did you mean 'lx_dla'"),
    ):
        with pytest.raises(InputError, match="overlays") as caught:
            draw_overlays(results, [overlay])
        assert words in str(caught.value)


def test_changes_say_what_moved_and_what_was_altered(study: FigureInputs) -> None:
    def tables(sigmas: float, **meta: Any) -> dict[str, Table]:
        made = shifted({name: study.tables[name] for name in DERIVED_TABLES}, sigmas)
        for table in made.values():
            table.meta.update(meta)
        return made

    config = {"model": {"pivots": [12.0, 22.5]}, "derive": {"draws": 10}}
    before = tables(0.0, inputs={"a.ecsv": "1", "b.ecsv": "2"}, config=json.dumps(config))
    config["model"]["pivots"] = [12.0, 22.0]
    now = tables(2.0, inputs={"a.ecsv": "9", "c.ecsv": "3"}, config=json.dumps(config))
    table = changes({"joint": before}, {"joint": now, "new": now})
    assert set(table["analysis"]) == {"joint"}
    finite = np.asarray(table["change_sigma"], float)
    assert_allclose(finite[np.isfinite(finite)], 2.0, rtol=1e-6)  # now minus before
    assert table.meta["changed"] == [
        "joint: added c.ecsv",
        "joint: removed b.ecsv",
        "joint: altered a.ecsv",
        "joint: model.pivots: [12.0, 22.5] became [12.0, 22.0]",
    ]
    assert "1 more" not in texts(draw_changes(table))
    same = changes({"joint": now}, {"joint": now})
    assert_allclose(same["change_sigma"], 0.0)
    assert same.meta["changed"] == ["nothing: the same inputs and settings"]
    assert len(changes({}, {"joint": now})) == 0
