"""Tables: bands of draws, with infinities; files whole or not at all."""

import numpy as np
import pytest
from astropy import units
from numpy.testing import assert_allclose
from scipy import stats

from fogline.tables import Curve, bands, curve_table, read_table, write_table, write_whole

Z = (np.array([2.0, 3.0]), "", "redshift")


def draws():
    normal = np.random.default_rng(1).standard_normal((40_000, 2))
    return Curve(normal * [1.0, 0.1] + [5.0, 7.0], "Mpc", "a length")


def test_bands_are_quantiles():
    found = bands(draws().values)
    assert list(found) == ["median", "lo68", "hi68", "lo95", "hi95"]
    for name, probability in zip(found, (0.5, 0.16, 0.84, 0.025, 0.975), strict=True):
        expected = stats.norm([5.0, 7.0], [1.0, 0.1]).ppf(probability)
        # Standard error of a tail quantile here: 0.013 σ.
        assert np.all(np.abs(found[name] - expected) < 0.06 * np.array([1.0, 0.1])), name


def test_bands_with_draws_beyond_reach():
    values = np.arange(1.0, 101.0)[:, None].repeat(2, axis=1)
    values[90:, 0] = np.inf
    found = bands(values)
    assert found["hi95"][0] == np.inf
    assert np.isfinite(found["hi68"][0])
    assert found["median"].tolist() == [50.0, 50.0]
    assert not any(np.isnan(value).any() for value in found.values())


def test_one_curve_has_plain_band_columns_and_several_are_prefixed():
    single = curve_table({"z": Z}, {"length": draws()}, with_bands=True)
    assert single.colnames == ["z", "median", "lo68", "hi68", "lo95", "hi95"]
    pair = curve_table({"z": Z}, {"a": draws(), "b": draws()}, with_bands=True)
    assert pair.colnames[:3] == ["z", "a_median", "a_lo68"]
    assert pair["b_hi95"].unit == units.Mpc
    assert pair["b_hi95"].description == "a length (hi95)"


def test_without_bands_the_first_draw_stands_in_columns_named_by_the_curves():
    table = curve_table({"z": Z}, {"length": draws()}, with_bands=False)
    assert table.colnames == ["z", "length"]
    assert_allclose(table["length"], draws().values[0])


def test_file_keeps_units_meta_and_eight_digits(tmp_path):
    table = curve_table({"z": Z}, {"length": draws()}, with_bands=False)
    table["length"][1] = np.inf
    table.meta["definition"] = "what it is"
    path = tmp_path / "new" / "folder" / "length.ecsv"
    write_table(table, path, fingerprint="abc", cosmology={"H0": 70.0})
    again = read_table(path)
    assert again["length"].unit == units.Mpc
    assert again.meta == {
        "definition": "what it is",
        "fingerprint": "abc",
        "cosmology": {"H0": 70.0},
    }
    assert_allclose(again["length"], table["length"], rtol=1e-7)
    assert "fingerprint" not in table.meta  # the caller's table is as it was


def test_failure_leaves_the_old_file_and_nothing_beside_it(tmp_path):
    path = tmp_path / "table.ecsv"
    path.write_text("old")

    def fail(temporary):
        temporary.write_text("half of the new")
        raise OSError("disk full")

    with pytest.raises(OSError, match="disk full"):
        write_whole(path, fail)
    assert path.read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_while_it_is_written_the_old_file_stands(tmp_path):
    path = tmp_path / "table.ecsv"
    path.write_text("old")

    def write(temporary):
        assert temporary.parent == path.parent  # a move between file systems is not one step
        assert temporary.suffix == path.suffix
        temporary.write_text("new")
        assert path.read_text() == "old"

    write_whole(path, write)
    assert path.read_text() == "new"


def test_results_are_as_readable_as_any_new_file(tmp_path):
    plain = tmp_path / "plain"
    plain.write_text("as the user's mask has it")
    write_whole(tmp_path / "result", lambda temporary: temporary.write_text("new"))
    assert (tmp_path / "result").stat().st_mode == plain.stat().st_mode
