"""Predictions and derived tables at one given point."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fogline.plan import DERIVED
from fogline.posterior import Posterior
from fogline.predictions import predict_table, write_derived_at
from fogline.priors import Prior
from fogline.response import build_response
from fogline.tables import read_table
from small_study import ANALYSIS, SETTING, THETA, empty_datasets, measured


@pytest.fixture
def datasets(tmp_path):
    response = build_response(empty_datasets(), SETTING)
    predicted = response.predict(THETA)
    data = []
    for one, rows in zip(response.datasets, response.slices, strict=True):
        path = tmp_path / one.path
        path.write_text(one.name)
        observed = np.round(predicted[rows]) if one.counts else predicted[rows]
        data.append(measured(dataclasses.replace(one, path=str(path)), observed))
    return data


def test_prediction_of_every_row(datasets):
    table = predict_table(ANALYSIS, datasets, THETA)
    assert table.colnames == ["dataset", "row", "quantity", "z", "observed", "predicted"]
    measured_rows = np.array([name != "dla" for name in table["dataset"]])
    assert_allclose(table["predicted"][measured_rows], table["observed"][measured_rows], rtol=1e-12)
    # Counts were rounded, predictions are not.
    assert np.all(np.abs(table["predicted"] - table["observed"])[~measured_rows] <= 0.5)


def test_ln_likelihood_is_that_of_the_posterior(datasets):
    table = predict_table(ANALYSIS, datasets, THETA + 0.01)
    posterior = Posterior.of(build_response(datasets, SETTING), Prior(ANALYSIS.model))
    expected = posterior.ln_likelihood(THETA[None] + 0.01)[0]
    assert table.meta["ln_likelihood"] == pytest.approx(expected, rel=1e-12)
    assert table.meta["analysis"] == "small"


def test_derived_tables_at_a_point_have_no_bands(tmp_path):
    write_derived_at(ANALYSIS, THETA, tmp_path / "derived")
    names = sorted(path.stem for path in (tmp_path / "derived").iterdir())
    assert names == sorted(DERIVED)
    table = read_table(tmp_path / "derived" / "mean_free_path.ecsv")
    assert table.colnames == ["z", "local", "unit_depth", "dz_unit_depth"]
    assert table["z"].tolist() == [2.0, 3.0, 4.0]
    assert table.meta["analysis"] == "small"
    # Sightlines scatter at a single point too.
    scatter = read_table(tmp_path / "derived" / "sightline_scatter.ecsv")
    assert all(scatter["transmission_lo68"] < scatter["transmission_hi68"])
