"""The miniature study from constraint files to figures."""

import json

import numpy as np
import pytest
import xarray
from arviz_stats.base import array_stats
from astropy.table import Table
from conftest import DATASETS, StudyFolder

from fogline.plan import CHECKS, DERIVED, FIGURES
from fogline.rounding import rounded

ANALYSES = ("all_data", "without_free_path")
BANDS = ("median", "lo68", "hi68", "lo95", "hi95")


@pytest.mark.parametrize("analysis", ANALYSES)
def test_every_file_of_the_contract_is_there(finished: StudyFolder, analysis: str) -> None:
    folder = finished.path / "results" / analysis
    tables = [f"tables/{name}.ecsv" for name in ("parameters", *DERIVED, *CHECKS)]
    figures = [f"figures/{name}.{form}" for name in FIGURES for form in ("pdf", "png")]
    pages = ("summary.html", "summary.md")
    for name in ("posterior.nc", "convergence.json", *pages, *tables, *figures):
        assert (folder / name).stat().st_size > 0, name


def test_verdict_is_good_and_printed(finished: StudyFolder) -> None:
    for analysis in ANALYSES:
        report = json.loads((finished.path / "results" / analysis / "convergence.json").read_text())
        assert report["converged"] is True, report["reasons"]
        assert report["reasons"] == []
        assert all(p["rhat"] < 1.01 and p["ess_bulk"] >= 800 for p in report["parameters"])
        assert np.isfinite(report["evidence"]["ln_z"])


def test_summary_says_what_the_tables_say(finished: StudyFolder) -> None:
    folder = finished.path / "results" / "all_data"
    text = (folder / "summary.md").read_text(encoding="utf-8")
    assert "1. **Converged? Yes.**" in text
    assert "Hold-outs were not run; `snakemake --cores all hold_outs`" in text
    table = Table.read(folder / "tables" / "hi_density.ecsv")
    row = table[np.argmin(np.abs(table["z"] - 3.5))]
    assert rounded(*(float(row[f"rho_hi_{b}"]) for b in BANDS[:3])).text in text
    assert all(f"| `{name}` |" in text for name in DATASETS)


def test_posterior_file_follows_the_arviz_schema(finished: StudyFolder) -> None:
    path = finished.path / "results" / "all_data" / "posterior.nc"
    with xarray.open_datatree(path, engine="h5netcdf") as tree:
        assert {
            "posterior",
            "sample_stats",
            "log_likelihood",
            "posterior_predictive",
            "observed_data",
        } <= set(tree.children)
        posterior = tree["posterior"]
        assert posterior["log_f"].dims == ("chain", "draw", "pivot")
        assert posterior["evolution"].dims == ("chain", "draw", "evolution_pivot")
        for group in ("log_likelihood", "posterior_predictive"):
            assert set(DATASETS) <= set(tree[group].data_vars)
        rows = tree["log_likelihood"]["lya_opacity"]
        assert rows.shape == (*posterior["log_f"].shape[:2], 8)


def test_diagnostics_of_others_agree_with_ours(finished: StudyFolder) -> None:
    """ArviZ, given the file alone, must come to the same verdict."""
    path = finished.path / "results" / "all_data" / "posterior.nc"
    with xarray.open_dataset(path, group="posterior", engine="h5netcdf") as posterior:
        log_f = posterior["log_f"].to_numpy()
    for k in range(log_f.shape[-1]):
        assert array_stats.rhat(log_f[..., k]) < 1.01
        assert array_stats.ess(log_f[..., k]) > 800


def test_tables_carry_units_bands_and_provenance(finished: StudyFolder) -> None:
    tables = finished.path / "results" / "all_data" / "tables"
    free_path = Table.read(tables / "mean_free_path.ecsv")
    assert str(free_path["local_median"].unit) == "Mpc"
    assert {f"{d}_{b}" for d in ("local", "unit_depth") for b in BANDS} < set(free_path.colnames)
    cddf = Table.read(tables / "column_distribution.ecsv")
    assert {"z", "log_nhi", *BANDS} <= set(cddf.colnames)
    assert (cddf["lo95"] <= cddf["lo68"]).all()
    assert (cddf["hi68"] <= cddf["hi95"]).all()
    for name in (*DERIVED, "predictive", "parameters"):
        meta = Table.read(tables / f"{name}.ecsv").meta
        assert len(meta["inputs"]) == len(DATASETS)
        assert meta["fogline_version"]
        assert "pivots" in meta["config"]


def test_curves_start_at_the_configured_redshifts(finished: StudyFolder) -> None:
    table = Table.read(finished.path / "results" / "all_data" / "tables" / "lya_opacity.ecsv")
    np.testing.assert_allclose(table["z"], [2.0, 2.5, 3.0, 3.5, 4.0])


def test_comparison_names_both_analyses(finished: StudyFolder) -> None:
    table = Table.read(finished.path / "results" / "comparison" / "tables" / "shifts.ecsv")
    assert set(table["analysis"]) == {"without_free_path"}
    assert set(table["reference"]) == {"all_data"}
    assert (finished.path / "results" / "comparison" / "figures" / "shifts.png").exists()


def test_log_tells_rate_of_convergence(finished: StudyFolder) -> None:
    log = (finished.path / "logs" / "sample_ensemble" / "all_data_0.log").read_text()
    assert "ESS" in log
    assert "R-hat" in log


def test_report_is_one_page_with_captions(finished: StudyFolder, tmp_path) -> None:
    page = tmp_path / "report.html"
    done = finished.run("--report", str(page))
    assert done.returncode == 0, done.stdout
    text = page.read_text()
    assert "Column-density distribution" in text
    assert "Comparison of analyses" in text
