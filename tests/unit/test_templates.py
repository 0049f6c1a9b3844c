"""Starter files: valid as printed, and every commented form in them can be taken up.

Common practice: nothing here comes from a publication.
"""

from __future__ import annotations

import pytest
from astropy.table import Table

from fogline.constraint_files import read_constraint_file
from fogline.quantities import FILE_SPECS
from fogline.quantities.spec import COMMON_META
from fogline.side_tables import side_template
from fogline.templates import template


def read(folder, text):
    (folder / "path.ecsv").write_text(side_template("sightlines"), encoding="utf-8")
    path = folder / "starter.ecsv"
    path.write_text(text, encoding="utf-8")
    return read_constraint_file(path)


@pytest.mark.parametrize("quantity", FILE_SPECS)
def test_template_is_valid_as_printed(tmp_path, quantity):
    data = read(tmp_path, template(quantity))
    assert data.quantity == quantity
    assert data.n_listed == 2
    assert all(data.labels) or quantity == "absorber_list"
    table = Table.read(tmp_path / "starter.ecsv", format="ascii.ecsv")
    assert table.meta["quantity"] == quantity


@pytest.mark.parametrize("quantity", FILE_SPECS)
def test_template_explains_every_key(quantity):
    lines = template(quantity).splitlines()
    keys = {line.strip("# ").split(":")[0] for line in lines if ":" in line}
    named = {key.name for key in (*COMMON_META, *FILE_SPECS[quantity].meta)} | {"cosmology"}
    assert named <= keys
    assert max(map(len, lines)) <= 100


@pytest.mark.parametrize("quantity", FILE_SPECS)
def test_template_says_how_limits_and_bins_are_written(quantity):
    text = template(quantity)
    assert ("z_lo, z_hi instead of z" in text) == (quantity != "absorber_list")
    assert "err_lo, err_hi instead of err" in text
    assert ("count, path" in text) == FILE_SPECS[quantity].counts


def test_commented_keys_can_be_taken_up(tmp_path):
    text = template("hi_density").replace("form: omega_hi", "form: omega_gas")
    for key in ("helium_factor", "log_nhi_max", "confidence", "likelihood", "note"):
        text = text.replace(f"#   # {key}: ", f"#   {key}: ")
    meta = read(tmp_path, text).meta
    assert (meta["helium_factor"], meta["log_nhi_max"], meta["confidence"]) == (1.3, 22.0, 0.95)
    assert meta["note"] == "..."


def test_cosmology_can_be_taken_up(tmp_path):
    text = template("column_distribution").replace("per: dz", "per: dX")
    data = read(tmp_path, text.replace("#   # cosmology:", "#   cosmology:"))
    assert data.cosmology is not None
    assert data.cosmology.H0 == 70.0


def test_counts_can_be_taken_up(tmp_path):
    text = template("lls_incidence").replace("name: value", "name: count")
    text = text.replace("name: err", "name: path").replace("z value err", "z count path")
    data = read(tmp_path, text.replace(" 1.6 ", " 16 "))
    assert data.counts
    assert list(data.observed) == [16.0, 16.0]
