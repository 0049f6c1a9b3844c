"""Candidates of a config: what passes becomes rows with errors, what does not is named.

Common practice: nothing here comes from a publication.
"""

from __future__ import annotations

import argparse
import dataclasses
import json

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from fogline.commands.check import run
from fogline.config import check_forecasts, load_config
from fogline.faults import InputError
from fogline.response import build_response
from fogline.settings import CandidateSettings, analysis_from_plain
from fogline.trust.candidates import forecast_candidates, read_candidates
from fogline.yaml_lines import read_yaml
from small_study import ANALYSIS, PRIOR, SETTING, THETA

CONFIG = """\
cosmology: {H0: 70.0, Om0: 0.3}
model:
  reference_redshift: 2.5
  pivots: [12.0, 15.0, 17.5, 20.0, 22.5]
  evolution: {pivots: [14.0, 20.0], prior: {dist: norm, loc: 1.5, scale: 1.5}}
forecasts:
  opacity:
    quantity: lya_opacity
    meta: {form: tau, log_nhi_min: 12.0, log_nhi_max: 17.2}
    rows:
      - {z: 3.0, relative_error: 0.05}
      - {z: 3.5, error: 0.01, label: second}
  lengths:
    quantity: mean_free_path
    meta: {definition: local, frame: proper, likelihood: lognormal}
    unit: Mpc
    rows: [{z: 2.44, relative_error: 0.1}]
  counted:
    quantity: column_distribution
    meta: {per: dX}
    rows:
      - {z_lo: 2.0, z_hi: 2.8, log_nhi_lo: 20.3, log_nhi_hi: 20.6, path: 500.0}
      - {z_lo: 2.0, z_hi: 2.8, log_nhi_lo: 20.6, log_nhi_hi: 21.0, path: 500.0}
  columns:
    quantity: column_distribution
    meta: {per: dX, cosmology: {H0: 72.0, Om0: 0.3}, scale: {dist: norm, loc: 1.0, scale: 0.1}}
    rows: [{z: 2.5, log_nhi_lo: 20.3, log_nhi_hi: 20.6, relative_error: 0.1}]
  flux:
    quantity: continuum_flux
    meta: {lines: removed, reference_wavelength: 920.0}
    rows: [{z: 4.0, wavelength: 880.0, error: 0.02}]
analyses:
  joint: {datasets: [data.ecsv]}
  fewer:
    base: joint
    forecasts:
      opacity: null
      counted: {meta: {per: dz}}
"""


@pytest.fixture
def folder(tmp_path, monkeypatch):
    (tmp_path / "data.ecsv").touch()
    monkeypatch.chdir(tmp_path)
    return tmp_path


def faults_of(folder, text):
    """Return lines and texts of faults, whichever of the two checks finds them."""
    (folder / "config.yaml").write_text(text, encoding="utf-8")
    document = read_yaml("config.yaml")
    try:
        study = load_config("config.yaml")
    except InputError as error:
        found = error.faults
    else:
        found = check_forecasts(study, "config.yaml", document.line)
    assert all(fault.path == "config.yaml" and "\n" not in fault.what for fault in found)
    return [(fault.line, fault.what) for fault in found]


def candidates(folder, text=CONFIG, name="joint"):
    (folder / "config.yaml").write_text(text, encoding="utf-8")
    return {c.name: c for c in read_candidates(load_config("config.yaml").analyses[name])}


def test_a_good_config_has_no_faults(folder):
    assert faults_of(folder, CONFIG) == []


def test_rows_are_those_of_the_config(folder):
    made = candidates(folder)
    assert list(made) == ["opacity", "lengths", "counted", "columns", "flux"]
    opacity, counted = made["opacity"].data, made["counted"].data
    assert_array_equal(opacity.z_lo, [3.0, 3.5])
    assert opacity.labels == ("", "second")
    assert opacity.meta["log_nhi_max"] == 17.2
    assert_array_equal(counted.search_path, 500.0)
    assert (counted.counts, counted.meta["likelihood"]) == (True, "poisson")
    assert_array_equal(counted.log_nhi_hi, [20.6, 21.0])
    assert (counted.cosmology.H0, made["columns"].data.cosmology.H0) == (70.0, 72.0)
    assert made["lengths"].data.unit == "Mpc"
    assert made["columns"].data.logarithmic
    assert_array_equal(made["flux"].data.wavelength_lo, 880.0)


def test_an_analysis_leaves_out_and_overrides(folder):
    made = candidates(folder, name="fewer")
    assert list(made) == ["lengths", "counted", "columns", "flux"]
    assert made["counted"].data.meta["per"] == "dz"
    assert candidates(folder)["counted"].data.meta["per"] == "dX"


def test_errors_follow_the_median_prediction(folder):
    made = candidates(folder)
    predicted = np.array([[0.2, 0.5], [0.4, 0.6], [9.0, 0.7]])
    at = made["opacity"].at(predicted)
    assert_array_equal(at.observed, [0.4, 0.6])
    assert_allclose(at.err_lo, [0.05 * 0.4, 0.01])
    assert_array_equal(at.err_lo, at.err_hi)
    assert_allclose(made["columns"].at([[-21.5]]).err_hi, 0.1 / np.log(10.0))
    lengths = made["lengths"].likelihood([[200.0], [220.0], [240.0]])
    assert_allclose(lengths.rows.sigma_lo, 0.1)  # of ln value
    assert_allclose(lengths.observed, np.log(220.0))
    assert made["counted"].likelihood(predicted).rows.poisson.all()


def test_nuisances_are_drawn_from_their_priors(folder):
    made = candidates(folder)
    draws = made["columns"].nuisance_draws(4000, np.random.default_rng(1))
    assert draws.shape == (4000, 1)
    assert (draws > 0.0).all()
    assert_allclose(draws.mean(), 1.0, atol=4 * 0.1 / np.sqrt(4000))
    assert made["opacity"].nuisance_draws(10, np.random.default_rng(1)) is None


def test_every_candidate_can_be_forecast(folder):
    text = CONFIG.replace("[12.0, 15.0, 17.5, 20.0, 22.5]", "[12.0, 13.5, 15.0, 20.3, 22.5]")
    made = list(candidates(folder, text).values())
    x = np.random.default_rng(2).standard_normal((400, len(PRIOR.coordinate_names)))
    spread = PRIOR.to_parameters(x)
    theta = THETA + 0.05 * (spread - spread.mean(axis=0))
    quantities = {"log_f[20.5]@2.5": SETTING.distribution.log_f(theta, np.array([20.5]), 2.5)[:, 0]}
    rng = np.random.default_rng(3)
    results = forecast_candidates(made, SETTING, theta, quantities, rng, 16)
    assert list(results) == [candidate.name for candidate in made]
    best = {name: found.best("log_f[20.5]@2.5") for name, found in results.items()}
    assert all(np.isfinite(ratio) and error < 0.2 for ratio, error in best.values())
    # The bin that holds the quantity informs it, the forest does not.
    assert best["columns"][0] < best["opacity"][0] - 3 * best["opacity"][1]


def test_predictions_are_those_of_files(folder):
    made = candidates(folder)["opacity"].data
    predicted = build_response([made], SETTING).predict(THETA)
    assert (np.diff(predicted) > 0.0).all()


def test_settings_survive_json():
    rows = ({"z": 3.0, "relative_error": 0.05},)
    candidate = CandidateSettings("opacity", "lya_opacity", {"form": "tau"}, "", rows)
    analysis = dataclasses.replace(ANALYSIS, forecasts=(candidate,))
    plain = json.loads(json.dumps(dataclasses.asdict(analysis)))
    assert analysis_from_plain(plain).forecasts == (candidate,)
    del plain["forecasts"]  # as files written before there were any
    assert analysis_from_plain(plain).forecasts == ()


# What does not pass. Each case: what is replaced, by what, text on the line that must be named,
# words of the message.

BAD = {
    "unknown quantity": ("lya_opacity", "lya_opacty", "lya_opacty", "mean 'lya_opacity'?"),
    "no quantity": ("    quantity: lya_opacity\n", "", "opacity:", "lacks 'forecasts.opacity.qua"),
    "a list": ("lya_opacity", "absorber_list", "absorber_list", "as counts of"),
    "unknown key": ("unit: Mpc", "units: Mpc", "units", "lengths.units'", "mean 'unit'?"),
    "unknown row key": ("z: 3.0, rel", "zz: 3.0, rel", "zz", "rows[0].zz'"),
    "no meta": ("log_nhi_min: 12.0, ", "", "form: tau", "lacks 'log_nhi_min' (lowest"),
    "unknown meta": ("frame: proper", "fram: proper", "fram", "'fram'", "mean 'frame'?"),
    "bad choice": ("form: tau", "form: tao", "tao", "form is 'tao'", "mean 'tau'?"),
    "no unit": ("    unit: Mpc\n", "", "lengths:", "forecasts.lengths: lacks 'unit'", "to Mpc"),
    "wrong unit": ("unit: Mpc", "unit: kg", "unit: kg", "unit is 'kg'", "convertible to Mpc"),
    "no such unit": ("unit: Mpc", "unit: mpx", "unit: mpx", "not a known unit"),
    "unit too many": (
        "    rows:\n      - {z: 3.0",
        "    unit: Mpc\n    rows:\n      - {z: 3.0",
        "unit: Mpc",
        "unit is 'Mpc', must be none",
    ),
    "unit of counts": (
        "    rows:\n      - {z_lo",
        "    unit: kpc\n    rows:\n      - {z_lo",
        "unit: kpc",
        "counts have no unit",
    ),
    "no rows": ("    rows: [{z: 2.44, relative_error: 0.1}]\n", "", "lengths:", "lengths.rows'"),
    "empty rows": ("[{z: 2.44, relative_error: 0.1}]", "[]", "rows: []", "a list of rows"),
    "no error": (", relative_error: 0.05", "", "{z: 3.0}", "lacks 'error' or 'relative_error'"),
    "both errors": ("0.05}", "0.05, error: 0.1}", "0.05", "'error' and 'relative_error'"),
    "path and error": ("21.0, path", "21.0, error: 0.1, path", "error: 0.1, p", "'path'"),
    "path without counts": ("relative_error: 0.05", "path: 5.0", "error: 0.01", "has the keys z"),
    "counts of opacity": (
        "rows: [{z: 2.44, relative_error: 0.1}]",
        "rows: [{z: 2.44, path: 1.0}]",
        "path: 1.0",
        "'path' has no meaning for mean_free_path",
    ),
    "no z": ("{z: 2.44, ", "{", "{relative", "either 'z' or both"),
    "half a bin": ("{z: 2.44, ", "{z_lo: 2.44, ", "z_lo: 2.44", "either 'z' or both"),
    "bin upside down": (
        "z_hi: 2.8, log_nhi_lo: 20.6",
        "z_hi: 1.8, log_nhi_lo: 20.6",
        "1.8",
        "z_hi",
    ),
    "no column bin": (
        "log_nhi_lo: 20.3, log_nhi_hi: 20.6, relative",
        "log_nhi_lo: 20.3, relative",
        "log_nhi_lo: 20.3, relative",
        "lacks key 'log_nhi_hi'",
    ),
    "keys differ": ("{z: 3.5, e", "{z_lo: 3.5, z_hi: 3.6, e", "z_lo: 3.5", "those of forecasts.op"),
    "negative error": ("error: 0.01", "error: -0.01", "-0.01", "rows[1].error is -0.01", "> 0"),
    "text error": ("error: 0.01", "error: small", "small", "'small'", "a number"),
    "beyond the pivots": ("log_nhi_max: 17.2", "log_nhi_max: 23.0", "opacity:", "beyond the piv"),
    "covariance": ("form: tau", "covariance: c.ecsv, form: tau", "covariance", "covariance names"),
    "scatter of counts": (
        "    meta: {per: dX}",
        "    meta: {per: dX, scatter: {dist: halfnorm, scale: 0.1}}",
        "scatter",
        "no effect on counts",
    ),
    "bad cosmology": ("H0: 72.0", "H0: 0.72", "0.72", "H0"),
    "bad prior": ("scale: {dist: norm", "scale: {dist: nrm", "nrm", "norm"),
    "name": ("  lengths:", "  le ngths:", "le ngths", "letters, digits"),
    "no mapping": (
        "{lines: removed, reference_wavelength: 920.0}",
        "removed",
        "removed",
        "flux.meta is 'removed'",
    ),
}


@pytest.mark.parametrize("case", BAD.values(), ids=BAD.keys())
def test_fault_names_place_and_reason(folder, case):
    old, new, at, *words = case
    text = CONFIG.replace(old, new, 1)
    assert text != CONFIG
    found = faults_of(folder, text)
    lines = [i for i, line in enumerate(text.split("\n"), 1) if at in line]
    here = [what for line, what in found if line in lines[:1]]
    assert any(all(word in what for word in words) for what in here), (lines, found)


def test_every_fault_at_once(folder):
    text = CONFIG.replace("form: tau", "form: tao").replace("unit: Mpc", "unit: kg")
    text = text.replace("quantity: continuum_flux", "quantity: flux")
    assert [line for line, _ in faults_of(folder, text)] == [9, 16, 29]


def test_fault_of_an_override_stands_where_it_is(folder):
    text = CONFIG.replace("{meta: {per: dz}}", "{meta: {per: dy}}")
    assert [line for line, _ in faults_of(folder, text)] == [38]


def test_reading_raises_with_every_fault(folder):
    text = CONFIG.replace("form: tau", "form: tao").replace("unit: Mpc", "unit: kg")
    with pytest.raises(InputError, match=r"(?s)config:1: .*kg.*config:1: .*tao"):
        candidates(folder, text)


def test_check_command_tells_them(folder):
    (folder / "config.yaml").write_text(CONFIG.replace("form: tau", "form: tao"), encoding="utf-8")
    with pytest.raises(
        InputError, match=r"config\.yaml:9: forecasts\.opacity\.meta\.form: form is"
    ):
        run(argparse.Namespace(config="config.yaml", files=[]))


PIECES = ("null", "[1]", "{a: 1}", "-1", "0", ".inf", "9" * 25, "yes", "''", "2026-01-01", "text")


@settings(max_examples=100, deadline=None, suppress_health_check=list(HealthCheck))
@given(data=st.data())
def test_whatever_stands_there_the_answer_is_candidates_or_faults(folder, data):
    start = CONFIG.index("forecasts:")
    values = [i for i in range(start, len(CONFIG)) if CONFIG[i - 2 : i] == ": "]
    text = CONFIG
    for at in sorted(data.draw(st.sets(st.sampled_from(values), max_size=2)), reverse=True):
        ends = [i for i in range(at + 1, len(text)) if text[i] in ",}\n"]
        text = text[:at] + data.draw(st.sampled_from(PIECES)) + text[ends[0] :]
    try:
        found = faults_of(folder, text)
    except InputError:  # no longer YAML
        return
    assert all(1 <= line <= text.count("\n") + 1 for line, _ in found)
    if not found:
        candidates(folder, text)
