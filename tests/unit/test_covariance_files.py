"""Covariance files: what they give, and every way in which they can be wrong."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fogline.constraint_files import read_constraint_file
from fogline.faults import InputError

DATA = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: z, datatype: float64}
# - {name: value, unit: Mpc, datatype: float64}
# - {name: err, unit: Mpc, datatype: float64}
# meta:
#   quantity: mean_free_path
#   definition: local
#   frame: proper
#   source: invented
#   covariance: paths_cov.txt
#   cosmology: {H0: 70.0, Om0: 0.3}
# schema: astropy-2.0
z value err
2.4 120.0 12.0
3.0 70.0 7.0
4.0 30.0 3.0
"""

HEAD = """\
# %ECSV 1.0
# ---
# datatype:
# - {name: row, datatype: int64}
# - {name: column, datatype: int64}
# - {name: NAME, UNITdatatype: float64}
# schema: astropy-2.0
row column NAME
"""

EXPECTED = np.array([[144.0, 42.0, 0.0], [42.0, 49.0, -6.3], [0.0, -6.3, 9.0]])


def head(name="covariance", unit="Mpc2"):
    return HEAD.replace("NAME", name).replace("UNIT", f"unit: {unit}, " if unit else "")


GOOD = head() + "0 0 144.0\n0 1 42.0\n1 1 49.0\n2 2 9.0\n2 1 -6.3\n"


@pytest.fixture
def read(tmp_path):
    def run(covariance=GOOD, data=DATA):
        (tmp_path / "paths.ecsv").write_text(data, encoding="utf-8")
        if covariance is not None:
            (tmp_path / "paths_cov.txt").write_text(covariance, encoding="utf-8")
        return read_constraint_file(tmp_path / "paths.ecsv")

    return run


def test_one_triangle_is_mirrored(read, tmp_path):
    data = read()
    assert_allclose(data.covariance, EXPECTED)
    assert data.linked == (str(tmp_path / "paths_cov.txt"),)


def test_units_are_brought_to_those_of_the_values(read):
    scaled = head(unit="kpc2") + "0 0 144e6\n0 1 42e6\n1 1 49e6\n2 2 9e6\n2 1 -6.3e6\n"
    assert_allclose(read(scaled).covariance, EXPECTED)


def test_correlations_go_with_the_errors(read):
    text = head("correlation", "") + "0 1 0.5\n1 2 -0.3\n"
    assert_allclose(read(text).covariance, EXPECTED)


def faults_of(read, *args, **kwargs):
    with pytest.raises(InputError, match="paths") as caught:
        read(*args, **kwargs)
    return [str(fault) for fault in caught.value.faults]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (GOOD.replace("unit: Mpc2, ", ""), "unit of column 'covariance' is missing"),
        (GOOD.replace("Mpc2", "Mpc"), "must convert to (Mpc)^2"),
        (GOOD.replace("0 0 144.0", "0 0 14.40"), "must agree within 2% with the error 12"),
        (GOOD.replace("2 2 9.0\n", ""), "lacks the variance of rows 2"),
        (GOOD + "1 0 41.0\n", "not symmetric"),
        (GOOD.replace("2 1 -6.3", "3 1 -6.3"), "paths_cov.txt:13: row is 3, must be a row of"),
        (GOOD.replace("0 1 42.0", "0 1 85.0"), "is not positive definite"),
        (GOOD.replace("0 1 42.0", "0 1 nan"), "paths_cov.txt:10: covariance is nan"),
        (head("correlation", "") + "0 1 1.5\n", "correlation is 1.5, must be a number in [-1, 1]"),
        (head("correlation", "Mpc") + "0 1 0.5\n", "unit of column 'correlation' is 'Mpc'"),
        (head("corelation", "") + "0 1 0.5\n", "unknown column 'corelation'"),
        ("", "is empty"),
    ],
)
def test_faults_name_the_covariance_file(read, text, words):
    faults = faults_of(read, text)
    assert any("paths_cov.txt:" in fault and words in fault for fault in faults), faults


def test_missing_file_is_a_fault_of_the_constraint_file(read):
    (fault,) = faults_of(read, None)
    assert "paths.ecsv:12: covariance names 'paths_cov.txt', but there is no file" in fault


def test_limits_and_unequal_errors_have_no_covariance(read):
    data = DATA.replace(
        "# - {name: err, unit: Mpc, datatype: float64}",
        (
            "# - {name: err_lo, unit: Mpc, datatype: float64}\n"
            "# - {name: err_hi, unit: Mpc, datatype: float64}\n"
            "# - {name: limit, datatype: string}"
        ),
    )
    data = data.replace("z value err\n", "z value err_lo err_hi limit\n")
    rows = '2.4 120.0 12.0 13.0 ""\n3.0 70.0 7.0 7.0 lower\n4.0 30.0 3.0 3.0 ""\n'
    data = data[: data.index("2.4 120.0")] + rows
    faults = faults_of(read, GOOD, data)
    assert any("a limit stands in a file with a covariance" in fault for fault in faults)
    assert any("errors that differ between the sides" in fault for fault in faults)
