"""The demo is what its script draws, and a fit recovers the truth behind it."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest

from fogline import build_fit, load_config, read_inputs, run_ensemble
from fogline.derived import DERIVED_TABLES, Draws

PROJECT = Path(__file__).parents[2]


@pytest.fixture(scope="module")
def script():
    spec = importlib.util.spec_from_file_location("draw", PROJECT / "config/demo/draw.py")
    module = importlib.util.module_from_spec(spec)
    import sys

    sys.modules["draw"] = module
    spec.loader.exec_module(module)
    return module


def test_files_are_what_the_script_draws(script, tmp_path: Path) -> None:
    script.main(tmp_path)
    drawn, shipped = (
        sorted(str(path.relative_to(folder)) for path in folder.rglob("*.ecsv"))
        for folder in (tmp_path, PROJECT / "config/demo")
    )
    assert drawn == shipped
    for name in drawn:
        assert (tmp_path / name).read_text() == (PROJECT / "config/demo" / name).read_text(), name


def test_demo_covers_every_quantity_and_its_forms(monkeypatch) -> None:
    monkeypatch.chdir(PROJECT)
    datasets = read_inputs(load_config("config/config.yaml").analyses["joint"])
    assert {data.quantity for data in datasets} == {
        "lya_opacity",
        "lls_incidence",
        "mean_free_path",
        "column_distribution",
        "hi_density",
        "lyman_series_opacity",
        "continuum_flux",
        "absorber_list",
    }
    assert any(data.counts for data in datasets)
    assert any((data.limit > 0).any() for data in datasets)
    assert any(data.meta.get("form") == "mean_flux" for data in datasets)
    assert len({data.cosmology for data in datasets}) > 2
    assert min(data.z_lo.min() for data in datasets) <= 2.1
    assert max(data.z_hi.max() for data in datasets) >= 4.5


@pytest.mark.slow
def test_fit_recovers_the_truth(script, monkeypatch) -> None:
    monkeypatch.chdir(PROJECT)
    analysis = load_config("config/config.yaml").analyses["joint"]
    fit = build_fit(analysis, read_inputs(analysis))
    posterior = fit.posterior
    result = run_ensemble(posterior.ln_prob, posterior.n_dim, analysis.sampler, 0)
    theta = posterior.prior.to_parameters(result.samples[::20])
    truth = np.array(script.TRUTH["log_f"] + script.TRUTH["evolution"])
    lo, hi = np.quantile(theta, [0.025, 0.975], axis=0)
    # 13 correlated parameters at 95%: more than 3 outside has a chance below 1% even if each
    # were independent, and the mean square pull is that of its own posterior.
    assert np.sum((truth < lo) | (truth > hi)) <= 3
    precision = np.linalg.inv(np.cov(theta.T))
    offset = truth - theta.mean(axis=0)
    # χ² of 13 degrees of freedom: 34.5 is its 99.9% point.
    assert offset @ precision @ offset < 34.5
    _check_derived(fit, theta, truth)


def _check_derived(fit, theta, truth) -> None:
    """Headline curves hold the truth in their 95% bands at most redshifts."""
    derive = fit.analysis.derive
    drawn, true = (Draws(t, fit.setting, derive) for t in (theta, truth[None]))
    for name in ("lya_opacity", "mean_free_path", "incidence", "hi_density"):
        curves, expected = (DERIVED_TABLES[name].curves(d) for d in (drawn, true))
        for key in ("tau_eff", "local", "unit_depth", "lx_lls_tau2", "lx_dla", "rho_hi"):
            if key in curves:
                lo, hi = np.quantile(curves[key].values, [0.025, 0.975], axis=0, method="nearest")
                inside = (expected[key].values[0] >= lo) & (expected[key].values[0] <= hi)
                assert inside.mean() > 0.8, key
