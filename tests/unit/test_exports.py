"""Exports: the same numbers as the tables, with units and definitions in every header."""

import numpy as np
import pytest
from astropy.io import fits
from astropy.table import Table
from numpy.testing import assert_allclose

from fogline.atomic import LYMAN_LIMIT
from fogline.derived import DERIVED_TABLES, Draws
from fogline.exports import SAMPLES, latex_table, opacity_grid, write_exports
from fogline.plan import EXPORTS
from small_study import ANALYSIS, SETTING, THETA

MANY = THETA + 0.05 * np.random.default_rng(4).standard_normal((250, len(THETA)))
DRAWS = Draws(MANY, SETTING, ANALYSIS.derive)
PARAMETERS = Table(
    {
        "name": ["log_f[12.0]", "evolution[14.0, z<3]", "scale[my_data]"],
        "median": [-9.712, 1.5, 1.021],
        "lo68": [-9.76, 1.2, 0.99],
        "hi68": [-9.67, 1.9, 1.06],
    }
)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    path = tmp_path_factory.mktemp("exports")
    meta = {"analysis": "small", "inputs": {"lya.ecsv": "0123"}}
    write_exports(DRAWS, PARAMETERS, path, meta)
    return path


def test_every_file_is_there(folder):
    assert sorted(p.name for p in folder.iterdir()) == sorted(EXPORTS)


def test_samples_are_those_of_the_posterior(folder):
    table = Table.read(folder / "column_distribution_samples.ecsv")
    assert table["sample"].shape == (len(table), SAMPLES)
    assert_allclose(table["sample"][:, 0], np.log10(DRAWS.f(table["log_nhi"], table["z"]))[0])
    assert "absorption distance" in table.meta["definition"].replace("  ", " ")
    assert table.meta["analysis"] == "small"


def test_fits_holds_the_same(folder):
    ecsv = Table.read(folder / "column_distribution_samples.ecsv")
    with fits.open(folder / "column_distribution_samples.fits") as hdus:
        data, header = hdus[1].data, hdus[1].header
        for name in ("z", "log_nhi", "median", "sample"):
            assert_allclose(data[name], ecsv[name], rtol=1e-7)
        history = "".join(str(header["HISTORY"]).split())
        assert "f(N_HI,X,z)incm^2" in history
        assert "lya.ecsv" in history


def test_transmission_has_a_column_for_each_source(folder):
    table = Table.read(folder / "transmission.ecsv")
    assert table.colnames == ["rest_wavelength", "z2.5", "z3", "z3.5", "z4"]
    assert str(table["rest_wavelength"].unit) == "Angstrom"
    # Redward of Lyα nothing absorbs; the farther the source, the less gets through.
    assert np.all(table["z2.5"][table["rest_wavelength"] < 900] > table["z4"][:15])


def test_opacity_at_the_limit_is_the_inverse_free_path():
    table = opacity_grid(DRAWS)
    at_limit = table[np.isclose(table["wavelength"], LYMAN_LIMIT)]
    path = DERIVED_TABLES["mean_free_path"].curves(DRAWS)["local"].values
    assert_allclose(at_limit["kappa_median"], np.median(1.0 / path, axis=0), rtol=1e-6)
    assert str(table["kappa_median"].unit) == "1 / Mpc"
    first = table[table["z"] == 2.0]
    assert np.all(np.diff(first["kappa_median"]) < 0.0)  # harder photons are absorbed less


def test_latex_rounds_to_two_digits_of_the_error():
    text = latex_table(PARAMETERS, "small")
    assert r"$\log f(10^{12.0}\,\mathrm{cm}^{-2})$ & $-9.712^{+0.042}_{-0.048}$ \\" in text
    assert r"$\gamma(14.0,\ z < 3)$ & $1.50^{+0.40}_{-0.30}$ \\" in text
    assert r"scale my\_data & $1.021^{+0.039}_{-0.031}$ \\" in text
    assert text.count(r"\\") == 4
