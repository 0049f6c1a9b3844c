"""Constraint files: what passes is read as it stands, what does not is named with its line.

Common practice: nothing here comes from a publication.
"""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest
from astropy import units
from astropy.table import Table
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from fogline.column_ranges import check_column_range, column_ranges
from fogline.constraint_files import read_constraint_file, read_constraint_files
from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.faults import InputError

LYA = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: z_lo, datatype: float64}
# - {name: z_hi, datatype: float64}
# - {name: value, datatype: float64}
# - {name: err_lo, datatype: float64}
# - {name: err_hi, datatype: float64}
# - {name: limit, datatype: string}
# - {name: label, datatype: string}
# meta:
#   quantity: lya_opacity
#   source: invented
#   form: mean_flux
#   log_nhi_min: 12.0
#   log_nhi_max: 17.2
# schema: astropy-2.0
z_lo z_hi value err_lo err_hi limit label
2.0 2.2 0.85 0.01 0.02 "" "first row"

# a comment between rows
3.0 3.2 0.70 "" "" upper ""
4.0 4.2 0.40 nan nan lower second
"""

COUNTS = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: z, datatype: float64}
# - {name: count, datatype: int64}
# - {name: path, datatype: float64}
# meta: !!omap
# - quantity: lls_incidence
# - source: invented
# - per: dX
# - tau_min: 2.0
# - cosmology: {H0: 72, Om0: 0.28, Ode0: 0.7}
# schema: astropy-2.0
z count path
2.5 14 8.5
3.5 0 1.25
"""

LENGTHS = """\
# %ECSV 1.0
# ---
# delimiter: ','
# datatype:
# - {name: z, datatype: float64}
# - {name: value, unit: Mpc / littleh, datatype: float64}
# - {name: err, unit: Mpc / littleh, datatype: float64}
# meta:
#   quantity: mean_free_path
#   source: invented
#   definition: unit_depth
#   frame: comoving
#   likelihood: lognormal
#   confidence: 0.9
#   cosmology:
#     H0: 70.0
#     Om0: 0.3
# schema: astropy-2.0
z,value,err
2.4,300,30
3.0,120.5,1.2e1
"""

COLUMNS = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: z, datatype: float64}
# - {name: log_nhi_lo, datatype: float64}
# - {name: log_nhi_hi, datatype: float64}
# - {name: log_f, unit: dex(cm2), datatype: float64}
# - {name: err, unit: dex, datatype: float64}
# - {name: limit, datatype: string}
# meta:
#   quantity: column_distribution
#   source: invented
#   per: dz
# schema: astropy-2.0
z log_nhi_lo log_nhi_hi log_f err limit
2.5 20.3 20.6 -21.5 0.05 ""
2.5 20.6 21.0 -22.3 0.07 upper
"""

DENSITY = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: z, datatype: float32}
# - {name: value, datatype: float64}
# - {name: err, datatype: float64}
# meta:
#   quantity: hi_density
#   source: invented
#   form: omega_gas
#   helium_factor: 1.3
#   log_nhi_min: 20.3
#   log_nhi_max: 22.0
#   cosmology: {H0: 70.0, Om0: 0.3}
# schema: astropy-2.0
z value err
2.5 8.0e-4 1.0e-4
"""

FLUX = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: z, datatype: float64}
# - {name: wavelength_lo, unit: nm, datatype: float64}
# - {name: wavelength_hi, unit: Angstrom, datatype: float64}
# - {name: value, datatype: float64}
# - {name: err, datatype: float64}
# meta:
#   quantity: continuum_flux
#   source: invented
#   lines: included
#   reference_wavelength: 920.0
# schema: astropy-2.0
z wavelength_lo wavelength_hi value err
3.1 88.0 890.0 0.7 0.03
3.1 89.0 905.0 0.8 0.04
"""

SERIES = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: z, datatype: float64}
# - {name: value, datatype: float64}
# - {name: err, datatype: float64}
# meta:
#   quantity: lyman_series_opacity
#   source: invented
#   line: gamma
#   foreground: included
#   form: decrement
#   log_nhi_min: 12.0
#   log_nhi_max: 17.2
# schema: astropy-2.0
z value err
2.8 0.31 0.02
"""

VALID = {
    "lya": LYA,
    "counts": COUNTS,
    "lengths": LENGTHS,
    "columns": COLUMNS,
    "density": DENSITY,
    "flux": FLUX,
    "series": SERIES,
}


def read(folder: Path, text: str, name: str = "data.ecsv") -> DataSet:
    path = folder / name
    path.write_bytes(text.encode("utf-8"))
    return read_constraint_file(path)


def faults(folder: Path, text: str, name: str = "data.ecsv") -> list[tuple[int, str]]:
    with pytest.raises(InputError, match=re.escape(name)) as caught:
        read(folder, text, name)
    assert all("\n" not in fault.what for fault in caught.value.faults)
    return [(fault.line, fault.what) for fault in caught.value.faults]


# What passes


def test_bins_two_sided_errors_and_limits(tmp_path):
    data = read(tmp_path, LYA)
    assert (data.name, data.quantity, data.unit) == ("data", "lya_opacity", "")
    assert_array_equal(data.z_lo, [2.0, 3.0, 4.0])
    assert_array_equal(data.z_hi, [2.2, 3.2, 4.2])
    assert_array_equal(data.observed, [0.85, 0.70, 0.40])
    assert_array_equal(data.err_lo, [0.01, np.nan, np.nan])
    assert_array_equal(data.err_hi, [0.02, np.nan, np.nan])
    assert_array_equal(data.limit, [0, 1, -1])
    assert data.labels == ("first row", "", "second")
    assert data.lines == (19, 22, 23)
    assert data.cosmology is None
    assert not data.counts
    assert data.confidence == 0.95
    assert data.meta["likelihood"] == "split_normal"
    assert "cosmology" not in data.meta
    assert np.isnan(data.search_path).all()
    assert np.isnan(data.log_nhi_lo).all()


def test_counts_and_ordered_mapping(tmp_path):
    data = read(tmp_path, COUNTS)
    assert data.counts
    assert_array_equal(data.observed, [14.0, 0.0])
    assert_array_equal(data.search_path, [8.5, 1.25])
    assert_array_equal(data.z_lo, data.z_hi)
    assert np.isnan(data.err_lo).all()
    assert data.cosmology == Cosmology(72.0, 0.28, 0.7)
    assert data.meta["per"] == "dX"
    assert data.meta["likelihood"] == "poisson"


def test_unit_with_little_h_is_kept_and_not_enabled_for_the_process(tmp_path):
    data = read(tmp_path, LENGTHS)
    assert data.unit == "Mpc / littleh"
    assert_array_equal(data.observed, [300.0, 120.5])
    assert_array_equal(data.err_hi, [30.0, 12.0])
    assert data.confidence == 0.9
    assert data.meta["likelihood"] == "lognormal"
    with pytest.raises(ValueError, match="littleh"):
        units.Unit("littleh")


def test_column_bins_in_dex(tmp_path):
    data = read(tmp_path, COLUMNS)
    assert data.unit == ""
    assert_array_equal(data.log_nhi_lo, [20.3, 20.6])
    assert_array_equal(data.log_nhi_hi, [20.6, 21.0])
    assert_array_equal(data.observed, [-21.5, -22.3])


def test_wavelengths_are_read_in_angstrom(tmp_path):
    data = read(tmp_path, FLUX)
    assert_allclose(data.wavelength_lo, [880.0, 890.0], rtol=1e-14)
    assert_allclose(data.wavelength_hi, [890.0, 905.0], rtol=1e-14)
    assert data.meta["reference_wavelength"] == 920.0
    single = FLUX.replace("wavelength_lo", "wavelength")
    single = re.sub(r"# - {name: wavelength_hi.*\n", "", single).replace("wavelength_hi ", "")
    single = single.replace(" 890.0", "").replace(" 905.0", "")
    data = read(tmp_path, single)
    assert_array_equal(data.wavelength_lo, data.wavelength_hi)


def test_density_keeps_its_helium_factor(tmp_path):
    data = read(tmp_path, DENSITY)
    assert data.meta["helium_factor"] == 1.3
    assert data.meta["form"] == "omega_gas"


def test_convertible_unit_is_kept_as_written(tmp_path):
    text = DENSITY.replace("form: omega_gas", "form: rho_hi").replace(
        "#   helium_factor: 1.3\n", ""
    )
    text = text.replace("name: value,", "name: value, unit: g / cm3,")
    text = text.replace("name: err,", "name: err, unit: g / cm3,").replace("e-4", "e-33")
    assert read(tmp_path, text).unit == "g / cm3"


@pytest.mark.parametrize("text", VALID.values(), ids=VALID.keys())
@pytest.mark.parametrize("ends", ["\r\n", "\r"])
def test_line_ends_do_not_matter(tmp_path, text, ends):
    plain, other = read(tmp_path, text), read(tmp_path, text.replace("\n", ends))
    assert_array_equal(plain.observed, other.observed)
    assert plain.lines == other.lines


def test_byte_order_mark_is_no_fault(tmp_path):
    assert read(tmp_path, f"\ufeff{COUNTS}").n_rows == 2


def test_file_written_by_astropy_is_read(tmp_path):
    table = Table({"z": [2.4, 3.0], "value": [1.5, 2.5], "err": [0.1, 0.2]})
    table["label"] = np.ma.array(["a b", "x"], mask=[False, True])
    table.meta = {"quantity": "lls_incidence", "source": "invented", "per": "dz", "tau_min": 1.0}
    table.write(tmp_path / "written.ecsv", format="ascii.ecsv")
    data = read_constraint_file(tmp_path / "written.ecsv")
    assert_array_equal(data.observed, [1.5, 2.5])
    assert data.labels == ("a b", "")


def test_errors_may_lack_where_every_row_is_a_limit(tmp_path):
    text = drop_column(LYA, "err_lo", "err_hi").replace('0.85 ""', "0.85 upper")
    assert np.isnan(read(tmp_path, text).err_lo).all()


def drop_column(text: str, *names: str) -> str:
    """Return a file without some columns (the cells of LYA's fourth and fifth)."""
    lines = [line for line in text.split("\n") if not any(f"name: {n}," in line for n in names)]
    body = next(i for i, line in enumerate(lines) if line.startswith("z"))
    cut = [
        " ".join(line.split(" ")[:3] + line.split(" ")[5:]) if line and line[0] != "#" else line
        for line in lines[body:]
    ]
    return "\n".join(lines[:body] + cut)


# What does not. Each case: file, what is replaced, by what, text on the line that must be named
# (None: line 1), words of the message.

BAD = {
    # meta
    "unknown key": ("lya", "form:", "from:", "from:", "unknown key 'from'", "mean 'form'"),
    "misspelt source": ("lya", "source:", "sorce:", "sorce:", "did you mean 'source'"),
    "missing source": ("lya", "#   source: invented\n", "", "meta:", "lacks 'source'"),
    "empty source": ("lya", "source: invented", "source: ''", "source:", "source is ''", "text"),
    "number as source": ("lya", "source: invented", "source: 3", "source:", "source is 3"),
    "missing form": ("lya", "#   form: mean_flux\n", "", "meta:", "lacks 'form'", "decrement"),
    "wrong choice": ("lya", "form: mean_flux", "form: flux", "form:", "'flux'", "tau | mean_flux"),
    "near choice": ("lya", ": mean_flux", ": meanflux", "form:", "did you mean 'mean_flux'"),
    "list as choice": ("lya", ": mean_flux", ": [tau]", "form:", "form is ['tau']"),
    "missing quantity": ("lya", "#   quantity: lya_opacity\n", "", "meta:", "lacks 'quantity'"),
    "unknown quantity": ("lya", ": lya_opacity", ": lya_opacty", "quantity:", "'lya_opacity'?"),
    "list as quantity": ("lya", ": lya_opacity", ": [a]", "quantity:", "unknown quantity"),
    "text for number": ("lya", "min: 12.0", "min: low", "log_nhi_min:", "'low'", "[8, 26]"),
    "bool for number": ("lya", "min: 12.0", "min: true", "log_nhi_min:", "True", "[8, 26]"),
    "N for log N": ("lya", "max: 17.2", "max: 1.6e+17", "log_nhi_max:", "1.6e+17", "[8, 26]"),
    "number as text": ("lya", "max: 17.2", "max: 17e0", "log_nhi_max:", "'17e0'", "17.0"),
    "infinite number": ("lya", "max: 17.2", "max: .inf", "log_nhi_max:", "inf", "[8, 26]"),
    "not a number": ("lya", "max: 17.2", "max: .nan", "log_nhi_max:", "nan", "[8, 26]"),
    "huge number": ("lya", "max: 17.2", f"max: 1{'0' * 400}", "log_nhi_max:", "[8, 26]"),
    "range upside down": ("lya", "max: 17.2", "max: 11", "log_nhi_max:", "greater than", "12"),
    "confidence 95": ("lengths", "ce: 0.9", "ce: 90", "confidence:", "90", "(0.5, 1)"),
    "confidence 0.5": ("lengths", "ce: 0.9", "ce: 0.5", "confidence:", "0.5", "(0.5, 1)"),
    "unknown likelihood": ("lengths", "lognormal", "normal", "likelihood:", "lognormal"),
    "lognormal in dex": ("columns", "per: dz", "per: dz\n#   likelihood: lognormal", "likelihood"),
    "likelihood of counts": (
        *("counts", "- per: dX", "- per: dX\n# - likelihood: lognormal", "likelihood"),
        *("no effect", "Poisson"),
    ),
    "meta is a list": ("counts", "meta: !!omap", "meta:", "meta:", "mapping"),
    "key twice": ("lya", "form: mean_flux", "form: tau\n#   form: tau", ("form: tau", 2), "twice"),
    "key twice in omap": ("counts", "- per: dX", "- per: dX\n# - per: dz", "per: dz", "twice"),
    "no cosmology per dX": ("counts", r"# - cosmology.*\n", "", "meta:", "'cosmology'", "dX"),
    "no cosmology, density": ("density", r"#   cosmology.*\n", "", "meta:", "lacks 'cosmology'"),
    "cosmology as name": ("counts", r"\{H0.*\}", "flat", "cosmology:", "'flat'", "{H0: 70.0"),
    "no Om0": ("counts", "Om0: 0.28, ", "", "cosmology:", "lacks 'Om0'"),
    "unknown parameter": ("counts", "Om0:", "OmegaM:", "cosmology:", "cosmology.OmegaM"),
    "little h for H0": ("lengths", "H0: 70.0", "H0: 0.7", "H0:", "0.7", "[10, 200]"),
    "negative density": ("lengths", "Om0: 0.3", "Om0: -0.3", "Om0:", "-0.3", "[0, 2]"),
    "no expansion": ("counts", "Om0: 0.28, Ode0: 0.7", "Om0: 0, Ode0: 2", "cosmology:", "H(z)"),
    "both limits": ("counts", "- per:", "- log_nhi_min: 17.5\n# - per:", "log_nhi_min", "exactly"),
    "no limit": ("counts", "# - tau_min: 2.0\n", "", "meta:", "exactly one", "none of them"),
    "tau of zero": ("counts", "tau_min: 2.0", "tau_min: 0", "tau_min:", "> 0"),
    "helium below 1": ("density", "factor: 1.3", "factor: 0.76", "helium_factor:", "[1, 2]"),
    "helium missing": ("density", "#   helium_factor: 1.3\n", "", "meta:", "'helium_factor'"),
    "helium unused": ("density", "omega_gas", "omega_hi", "helium_factor:", "no effect"),
    "mean free path frame": ("lengths", "comoving", "physical", "frame:", "proper | comoving"),
    "foreign key": ("counts", "- per:", "- form: tau\n# - per:", "form:", "unknown key 'form'"),
    "QTable": (
        *("lya", "meta:", "meta:\n#   __serialized_columns__: {z: {}}", "__serialized"),
        "QTable",
    ),
    # columns
    "unknown column": ("density", r"err\b", "error", "name: error", "'error'", "mean 'err'"),
    "no value": ("density", r"\bvalue\b", "val", "datatype:", "lacks column 'value'"),
    "no z": ("density", r"\bz\b", "redshift", "datatype:", "lacks column 'z'"),
    "z and bins": ("columns", "log_nhi_hi", "z_lo", "name: z,", "'z_lo'", "one form"),
    "half a bin": ("lya", "z_hi", "z", "datatype:", "lacks column 'z_hi'"),
    "one error": ("lya", "err_hi", "err", "name: err,", "beside 'err_lo'"),
    "half an error": ("lya", "err_hi", "note", "datatype:", "lacks column 'err_hi'"),
    "no error": ("density", r"\berr\b", "label", "datatype:", "lacks column 'err'"),
    "no path": ("counts", "path", "label", "datatype:", "lacks column 'path'"),
    "count and error": ("counts", r"\bz\b", "err", "name: err", "Poisson"),
    "counts of lengths": ("lengths", r"\bvalue\b", "count", "name: count", "unknown column"),
    "no column bins": ("columns", "log_nhi_lo", "label", "datatype:", "lacks column 'log_nhi_lo'"),
    "value for log_f": ("columns", "log_f", "value", "name: value", "unknown column 'value'"),
    "column twice": ("lya", "z_hi", "z_lo", ("z_lo", 2), "stands twice"),
    "string column": ("density", "value, datatype: float64", "value, datatype: string", "value"),
    "numeric limit": ("lya", "limit, datatype: string", "limit, datatype: float64", "upper"),
    "object column": ("lya", "label, datatype: string", "label, datatype: object", "object"),
    "no datatype": ("lya", "label, datatype: string", "label", "name: label", "datatype None"),
    "no name": ("lya", "{name: label,", "{nom: label,", "nom: label", "needs 'name"),
    "names differ": ("density", "z value err", "z value error", "z value error", "same order"),
    "missing unit": ("lengths", "value, unit: Mpc / littleh,", "value,", "name: value", "missing"),
    "unknown unit": ("lengths", "value, unit: Mpc / littleh", "value, unit: Mpcs", "Mpcs", "known"),
    "wrong unit": ("lengths", "value, unit: Mpc / littleh", "value, unit: s", "unit: s", "Mpc"),
    "unit of logarithms": (
        *("lengths", "value, unit: Mpc / littleh", "value, unit: dex(Mpc)", "name: value"),
        "convertible to",
    ),
    "errors in another unit": (
        *("lengths", "err, unit: Mpc / littleh", "err, unit: kpc", "name: err"),
        *("'kpc'", "'Mpc / littleh'"),
    ),
    "unit of a flux": ("lya", "name: value,", "name: value, unit: Jy,", "name: value", "none"),
    "unit of z": ("lya", "name: z_lo,", "name: z_lo, unit: km / s,", "name: z_lo", "none"),
    "unit of counts": ("counts", "name: count,", "name: count, unit: m,", "name: count", "none"),
    "unit of f": ("columns", r"dex\(cm2\)", "cm2", "name: log_f", "dex(cm2)"),
    "unit is a mapping": ("lya", "name: z_lo,", "name: z_lo, unit: {a: 1},", "z_lo", "text"),
    # rows
    "too few cells": ("density", "2.5 8.0e-4 1.0e-4", "2.5 8.0e-4", "2.5 8", "2 cells", "3"),
    "too many cells": ("density", "1.0e-4$", "1.0e-4 1", "2.5 8", "4 cells", "3"),
    "open quote": ("lya", '"first row"', '"first row', "2.0 2.2", "quotes"),
    "text in a number": ("density", "8.0e-4", "low", "2.5 low", "value is 'low'", "a number"),
    "comma as point": ("density", "8.0e-4", "8,0e-4", "2.5 8,0", "8,0e-4", "a number"),
    "hexadecimal": ("density", "8.0e-4", "0x1f", "2.5 0x1f", "a number"),
    "underscore": ("density", "8.0e-4", "1_0", "2.5 1_0", "a number"),
    "fraction of a count": ("counts", "2.5 14", "2.5 14.5", "2.5 14.5", "14.5", "whole number"),
    "huge count": ("counts", "2.5 14", f"2.5 {'9' * 30}", "2.5 999", "whole number"),
    "negative count": ("counts", "2.5 14", "2.5 -14", "2.5 -14", "count is -14", ">= 0"),
    "missing count": ("counts", "2.5 14", '2.5 ""', '2.5 ""', "count is empty"),
    "no search path": ("counts", "1.25", "0", "3.5 0 0", "path is 0", "> 0"),
    "missing value": ("density", "8.0e-4", '""', '2.5 ""', "value is empty"),
    "value is nan": ("density", "8.0e-4", "nan", "2.5 nan", "value is nan", "(0, 1)"),
    "infinite value": ("lengths", "300", "inf", "2.4,inf", "value is inf", "> 0"),
    "overflowing value": ("lengths", "300", "1e999", "2.4,1e999", "value is 1e999"),
    "flux above 1": ("lya", "0.85", "1.85", "2.0 2.2", "value is 1.85", "(0, 1)"),
    "flux of 0": ("lya", "0.85", "0", "2.0 2.2", "value is 0", "(0, 1)"),
    "f for log f": ("columns", "-21.5", "3e-22", "3e-22", "log_f is 3e-22", "(-60, 0)"),
    "negative error": ("lya", " 0.01 ", " -0.01 ", "2.0 2.2", "err_lo is -0.01", "> 0"),
    "zero error": ("density", "1.0e-4", "0", "2.5 8.0e-4 0", "err is 0", "> 0"),
    "missing error": ("density", "1.0e-4", '""', "2.5 8.0e-4", "err is empty", "> 0"),
    "limit in dex without error": ("columns", "0.07 upper", '"" upper', "upper", "err is empty"),
    "z of 0": ("density", "2.5 8", "0 8", "0 8.0e-4", "z is 0", "(0, 20]"),
    "z beyond 20": ("density", "2.5 8", "25 8", "25 8.0e-4", "z is 25", "(0, 20]"),
    "z missing": ("density", "2.5 8", '"" 8', '"" 8.0e-4', "z is empty"),
    "bin upside down": ("lya", "3.0 3.2", "3.2 3.0", "3.2 3.0", "z_hi is 3.0", "z_lo = 3.2"),
    "bin of no width": ("lya", "3.0 3.2", "3.2 3.2", "3.2 3.2", "z_hi is 3.2", "greater than"),
    "limit of another kind": ("lya", " upper", " above", "above", "limit is above", "lower"),
    "columns upside down": ("columns", "20.6 21.0", "21.0 20.6", "21.0 20.6", "log_nhi_hi is 20.6"),
    "N for log N in rows": ("columns", "20.6 21.0", "20.6 1e21", "1e21", "log_nhi_hi", "[8, 26]"),
    # composite spectra and higher lines
    "bin of wavelengths upside down": (
        *("flux", "89.0 905.0", "91.0 905.0", "91.0 905.0"),
        *("wavelength_hi is 905.0", "greater than wavelength_lo = 91.0"),
    ),
    "negative wavelength": ("flux", "88.0", "-88.0", "-88.0", "wavelength_lo is -88.0", "> 0"),
    "wavelength missing": ("flux", "3.1 88.0", '3.1 ""', '3.1 ""', "wavelength_lo is empty"),
    "wavelength without unit": ("flux", "unit: nm, ", "", "name: wavelength_lo", "is missing"),
    "wavelength in Hz": ("flux", "unit: nm", "unit: Hz", "unit: Hz", "convertible to Angstrom"),
    "half a wavelength bin": ("flux", "wavelength_hi", "label", "datatype:", "'wavelength_hi'"),
    "no wavelengths": (
        *("flux", r"# - {name: wavelength.*\n|wavelength_.. | [89]\d\.0 \d+\.0", ""),
        *("datatype:", "lacks column 'wavelength'"),
    ),
    "wavelength unknown unit": ("flux", "unit: nm", "unit: nn", "unit: nn", "not a known unit"),
    "wavelengths of an opacity": ("series", r"err\b", "wavelength", "name: wavelength", "unknown"),
    "lines neither in nor out": ("flux", ": included", ": some", "lines:", "included | removed"),
    "no word on lines": ("flux", "#   lines: included\n", "", "meta:", "lacks 'lines'"),
    "reference of 0": ("flux", "length: 920.0", "length: 0", "reference_wavelength", "[1, 100000]"),
    "flux below 0": ("flux", " 0.7 ", " -0.7 ", "-0.7", "value is -0.7", "(0, 10)"),
    "Lya as a higher line": ("series", "gamma", "alpha", "line:", "beta | gamma"),
    "no word on the foreground": (
        *("series", "#   foreground: included\n", "", "meta:", "lacks 'foreground'"),
    ),
    # form of the file
    "no rows": ("density", r"2\.5 8.*\n", "", "z value err", "no rows"),
    "no names": ("density", r"z value err\n2\.5.*\n", "", "schema", "no rows"),
    "no ECSV line": ("lya", r"# %ECSV 1.0\n", "", None, "%ECSV"),
    "bad ECSV line": ("lya", "%ECSV 1.0", "%ECSV one", None, "%ECSV 1.0"),
    "no meta": ("density", r"# meta:\n(#   .*\n)+", "", None, "'meta'"),
    "keys beside meta": (
        "lya",
        "# meta:",
        "# quantity: x\n# meta:",
        "quantity: x",
        "under 'meta:'",
    ),
    "misspelt meta": ("lya", "# meta:", "# mata:", "mata", "did you mean 'meta'"),
    "no columns": ("density", "datatype:", "columns:", "columns:", "unknown key 'columns'"),
    "bad delimiter": ("lengths", "delimiter: ','", "delimiter: ';'", "delimiter", "' ' or ','"),
    "broken YAML": ("lya", "form: mean_flux", "form: [mean_flux", "log_nhi_min", "valid YAML"),
    "tab in YAML": ("lya", "#   form:", "#  \tform:", "form:", "valid YAML"),
    "python tag": ("lya", "mean_flux", "!!python/name:os.system x", "form:", "cannot read"),
    "bad date": ("lya", "source: invented", "source: 2020-13-45", "source:", "2020-13-45"),
}


@pytest.mark.parametrize("case", BAD.values(), ids=BAD.keys())
def test_fault_names_line_and_reason(tmp_path, case):
    name, old, new, at, *words = case
    literal = "\\" not in old and not old.endswith("$") and "*" not in old
    text = VALID[name].replace(old, new) if literal else re.sub(old, new, VALID[name], flags=re.M)
    assert text != VALID[name]
    found = faults(tmp_path, text)
    at, nth = at if isinstance(at, tuple) else (at, 1)
    lines = [i for i, line in enumerate(text.split("\n"), 1) if at is None or at in line]
    line = lines[nth - 1]
    here = [what for where, what in found if where == line]
    assert any(all(word in what for word in words) for what in here), (line, found)


def test_every_fault_at_once(tmp_path):
    text = LYA.replace("form: mean_flux", "form: mean_fluxx").replace("source", "sauce")
    text = text.replace("2.0 2.2 0.85", "2.2 2.0 -0.85").replace("lower second", "lower")
    text = text.replace("3.0 3.2 0.70", "3.0 x 0.70")
    found = faults(tmp_path, text)
    assert [line for line, _ in found] == [11, 13, 14, 19, 22, 23]


def test_lognormal_needs_the_errors_of_limits(tmp_path):
    text = LYA.replace("form: mean_flux", "form: mean_flux\n#   likelihood: lognormal")
    assert [line for line, _ in faults(tmp_path, text)] == [23, 23, 24, 24]


@pytest.mark.parametrize("name", ["two words.ecsv", "a.b.ecsv", "τ.ecsv", ".ecsv"])
def test_stem_names_outputs(tmp_path, name):
    (line, what), *others = faults(tmp_path, DENSITY, name)
    assert (line, others) == (1, [])
    assert "letters, digits" in what


def test_missing_file_and_directory(tmp_path):
    with pytest.raises(InputError, match=r"none\.ecsv:1: no such file"):
        read_constraint_file(tmp_path / "none.ecsv")
    with pytest.raises(InputError, match="is a directory"):
        read_constraint_file(tmp_path)


@pytest.mark.parametrize(
    ("raw", "line", "words"),
    [
        (b"", 1, "is empty"),
        (b"\n  \n", 1, "is empty"),
        (b"# %ECSV 1.0\n# a\0b\n", 2, "binary"),
        (
            DENSITY.encode().replace(b"invented", b"inv\xe9nted"),
            9,
            "not UTF-8 text: found byte 0xe9",
        ),
        (b"z,value\n1,2\n", 1, "first line must be '# %ECSV 1.0'"),
        (b"# %ECSV 1.0\n", 1, "must have the keys 'datatype'"),
        (b"# %ECSV 1.0\n# ---\n# a: &a [*a]\nz\n1\n", 3, "refers to itself"),
        (b"# %ECSV 1.0\n# ---\n# " + b"[" * 1500 + b"\n", 1, "nested too deeply"),
    ],
)
def test_file_that_is_no_table(tmp_path, raw, line, words):
    path = tmp_path / "data.ecsv"
    path.write_bytes(raw)
    with pytest.raises(InputError, match=re.escape(words)) as caught:
        read_constraint_file(path)
    assert [fault.line for fault in caught.value.faults] == [line]


def test_aliases_that_multiply_are_refused(tmp_path):
    levels = "".join(f"# a{i}: &a{i} [{', '.join([f'*a{i - 1}'] * 10)}]\n" for i in range(1, 9))
    text = f"# %ECSV 1.0\n# ---\n# a0: &a0 [1, 1]\n{levels}z\n1\n"
    assert any("more than 100000 values" in what for _, what in faults(tmp_path, text))


def test_faults_of_several_files_and_equal_stems(tmp_path):
    paths = []
    for folder, text in (("a", DENSITY), ("b", DENSITY), ("c", DENSITY.replace("8.0e-4", "-1"))):
        (tmp_path / folder).mkdir()
        paths.append(tmp_path / folder / "same.ecsv")
        paths[-1].write_text(text, encoding="utf-8")
    assert [data.name for data in read_constraint_files(paths[:1])] == ["same"]
    with pytest.raises(InputError, match="has the same name 'same'") as caught:
        read_constraint_files([*paths, tmp_path / "none.ecsv"])
    found = [(Path(fault.path).parent.name, fault.line) for fault in caught.value.faults]
    assert found == [("b", 1), ("c", 1), ("c", 17), (tmp_path.name, 1)]


# Column ranges


def test_column_ranges(tmp_path):
    ranges = {name: column_ranges(read(tmp_path, text)) for name, text in VALID.items()}
    low = ranges["counts"][0]
    assert low == pytest.approx(17.50, abs=0.005)  # tau = 2 at 912 Å
    assert ranges == {
        "lya": (12.0, 17.2),
        "counts": (low, None),
        "lengths": (None, None),
        "columns": (20.3, 21.0),
        "density": (20.3, 22.0),
        "flux": (None, None),
        "series": (12.0, 17.2),
    }


@pytest.mark.parametrize(
    ("name", "pivots", "line"),
    [
        ("lya", (13.0, 15.0, 22.0), 15),
        ("lya", (12.0, 15.0, 17.0), 16),
        ("counts", (18.0, 20.0, 22.0), 11),
        ("counts", (12.0, 14.0, 16.0), 11),
        ("columns", (12.0, 15.0, 20.8), 17),
        ("columns", (20.5, 20.6, 22.0), 16),
        ("density", (12.0, 15.0, 21.5), 13),
    ],
)
def test_range_beyond_the_pivots_names_both(tmp_path, name, pivots, line):
    (fault,) = check_column_range(read(tmp_path, VALID[name]), pivots)
    assert fault.line == line
    assert f"{pivots[0]:g} to {pivots[-1]:g}" in fault.what


@pytest.mark.parametrize("name", VALID)
def test_range_up_to_the_pivots_is_allowed(tmp_path, name):
    data = read(tmp_path, VALID[name])
    low, high = column_ranges(data)
    assert check_column_range(data, (low or 12.0, 17.5, high or 22.0)) == []


# Whatever is done to a file, the answer is a data set or faults


PIECES = (
    *("\n", "# ", '"', "{", "}", "[", ": ", "- ", "!!omap", "!!set ", "? ", "&a ", "*a", "<<: "),
    *("|", ">", "'", "#", ",", "\t", "\x1c", "\u2028", "nan", "1e400", "-1", "9" * 25),
    *("%ECSV 0.9", "unit: deg_C", "# - {name: z, datatype: int8, subtype: json}\n"),
)


@st.composite
def mutated(draw) -> str:
    text = draw(st.sampled_from(list(VALID.values())))
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(text)))
        end = min(len(text), start + draw(st.integers(0, 12)))
        pieces = st.text(max_size=6) | st.sampled_from(PIECES)
        text = text[:start] + draw(pieces) + text[end:]
    return text


@settings(max_examples=400, deadline=None, suppress_health_check=list(HealthCheck))
@given(text=mutated())
def test_mutated_file_gives_data_or_faults(tmp_path_factory, text):
    path = tmp_path_factory.getbasetemp() / "mutated.ecsv"
    path.write_bytes(text.encode("utf-8", "surrogatepass"))
    try:
        data, found = read_constraint_file(path), ()
    except InputError as error:
        data, found = None, error.faults
    n_lines = len(re.split("\r\n|\r|\n", text))
    assert all(1 <= fault.line <= n_lines for fault in found)
    if data is None:
        assert found
        return
    assert data.n_rows == len(data.lines) == len(data.labels) > 0
    assert np.isfinite(data.observed).all()
    free = (data.limit != 0) | data.counts
    assert (free | (np.isfinite(data.err_lo) & (data.err_lo > 0))).all()
    assert ((data.z_lo > 0) & (data.z_lo <= data.z_hi) & (data.z_hi <= 20)).all()
