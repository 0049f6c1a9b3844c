"""Derived tables against adaptive quadrature: definitions, units, shares."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose

import reference_integrals as reference
from fogline.derived import DERIVED_TABLES, Draws, write_derived
from fogline.tables import read_table
from reference_integrals import SIGMA_912, Truth, background, dx_dz
from small_study import ANALYSIS, EVOLUTION_PIVOTS, EXPONENTS, LOG_F, PIVOTS, SETTING, THETA

TRUTH = Truth(2.5, PIVOTS, LOG_F, EVOLUTION_PIVOTS, EXPONENTS, background(70.0, 0.3))
DRAWS = Draws(THETA[None], SETTING, ANALYSIS.derive)
Z = DRAWS.z
RTOL = 3e-6


def curves(name, draws=DRAWS):
    return DERIVED_TABLES[name].curves(draws)


def values(name, draws=DRAWS):
    return {key: curve.values[0] for key, curve in curves(name, draws).items()}


def test_every_table_has_rows_and_a_definition():
    for name, table in DERIVED_TABLES.items():
        assert table.name == name
        assert len(table.definition) > 40
        (first, *_) = table.keys(DRAWS).values()
        for curve in table.curves(DRAWS).values():
            assert curve.values.shape[1] == len(first[0]), name
            if not getattr(table, "over_sightlines", False):
                assert len(curve.values) == 1, name


def test_column_distribution_is_f_on_its_grid():
    keys = DERIVED_TABLES["column_distribution"].keys(DRAWS)
    z, log_nhi = keys["z"][0], keys["log_nhi"][0]
    assert sorted(set(z)) == [2.5, 3.5]
    assert (log_nhi.min(), log_nhi.max()) == (12.0, 22.5)
    found = values("column_distribution")["log_f"]
    expected = [np.log10(TRUTH.f(n, x)) for n, x in zip(log_nhi, z, strict=True)]
    assert_allclose(found, expected, rtol=1e-12)


@pytest.mark.parametrize(
    ("name", "ends"),
    [
        ("lls_tau1", (np.log10(1.0 / SIGMA_912), 22.5)),
        ("lls_tau2", (np.log10(2.0 / SIGMA_912), 22.5)),
        ("sub_dla", (19.0, 20.3)),
        ("dla", (20.3, 22.5)),
    ],
)
def test_incidence(name, ends):
    found = values("incidence")
    lx = np.array([TRUTH.integral(*ends, z) for z in Z])
    assert_allclose(found[f"lx_{name}"], lx, rtol=RTOL)
    assert_allclose(found[f"lz_{name}"], lx * dx_dz(TRUTH.cosmology, Z), rtol=RTOL)


def test_hi_density_and_shares():
    found = values("hi_density")
    cosmology = TRUTH.cosmology
    rho = [reference.rho_hi(TRUTH, z, 12.0, 22.5, cosmology) for z in Z]
    assert_allclose(found["rho_hi"], rho, rtol=RTOL)
    omega = [reference.omega_hi(TRUTH, z, 12.0, 22.5, cosmology) for z in Z]
    assert_allclose(found["omega_hi"], omega, rtol=RTOL)
    edges = {"dla": (20.3, 22.5), "sub_dla": (19.0, 20.3), "lls": (17.2, 19.0)}
    for name, (low, high) in edges.items():
        part = [reference.rho_hi(TRUTH, z, low, high, cosmology) for z in Z]
        assert_allclose(found[f"share_{name}"], np.array(part) / rho, rtol=RTOL, err_msg=name)
    total = sum(found[f"share_{name}"] for name in (*edges, "forest"))
    assert_allclose(total, 1.0, rtol=1e-12)
    assert curves("hi_density")["rho_hi"].unit == "Msun / Mpc3"


def test_lya_opacity_counts_up_to_the_optically_thick():
    expected = [reference.tau_lya(TRUTH, z, 12.0, 17.2, 26.0) for z in Z]
    assert_allclose(values("lya_opacity")["tau_eff"], expected, rtol=RTOL)


def test_both_free_paths_are_proper_mpc():
    found = values("mean_free_path")
    local = [reference.local_free_path(TRUTH, z, TRUTH.cosmology) for z in Z]
    unit_depth = [reference.unit_depth_free_path(TRUTH, z, TRUTH.cosmology) for z in Z]
    assert_allclose(found["local"], local, rtol=RTOL)
    assert_allclose(found["unit_depth"], unit_depth, rtol=RTOL)
    assert {name: curve.unit for name, curve in curves("mean_free_path").items()} == {
        "local": "Mpc",
        "unit_depth": "Mpc",
        "dz_unit_depth": "",
    }
    steps = [z - TRUTH.z_of_unit_depth(z) for z in Z]
    assert_allclose(found["dz_unit_depth"], steps, rtol=1e-4)


def test_opacity_budget_integrates_to_the_opacity_and_to_one():
    table = DERIVED_TABLES["opacity_budget"]
    log_nhi = table.keys(DRAWS)["log_nhi"][0]
    z = table.keys(DRAWS)["z"][0]
    found = values("opacity_budget")
    for redshift in (2.5, 3.5):
        rows = z == redshift

        def total(name, rows=rows):
            return np.trapezoid(found[name][rows], log_nhi[rows])

        # The trapezoid rule on 0.05 dex, across kinks.
        local = reference.local_free_path(TRUTH, redshift, TRUTH.cosmology)
        assert total("opacity_per_dex") == pytest.approx(1.0 / local, rel=2e-3)
        assert total("opacity_share") == pytest.approx(1.0, rel=2e-3)
        assert total("mass_share") == pytest.approx(1.0, rel=2e-3)
    assert curves("opacity_budget")["opacity_per_dex"].unit == "1 / Mpc"


def test_opacity_per_dex_at_one_column():
    table = DERIVED_TABLES["opacity_budget"]
    log_nhi, z = table.keys(DRAWS)["log_nhi"][0], table.keys(DRAWS)["z"][0]
    (row,) = np.flatnonzero(np.isclose(log_nhi, 17.5) & (z == 3.5))
    nhi = 10.0**17.5
    per_mpc = dx_dz(TRUTH.cosmology, 3.5) * 4.5 * TRUTH.cosmology.H(3.5).value / 299792.458
    expected = TRUTH.f(17.5, 3.5) * nhi * np.log(10.0) * (1.0 - np.exp(-nhi * SIGMA_912)) * per_mpc
    assert values("opacity_budget")["opacity_per_dex"][row] == pytest.approx(expected, rel=1e-9)


def test_classes_beyond_the_pivots_are_empty():
    # A forest alone: pivots end at 17.5.
    distribution = dataclasses.replace(
        SETTING.distribution, pivots=PIVOTS[:5], evolution_pivots=(14.0,)
    )
    setting = dataclasses.replace(SETTING, distribution=distribution)
    draws = Draws(np.array([[*LOG_F[:5], 1.9]]), setting, ANALYSIS.derive)
    found = values("hi_density", draws)
    assert np.all(found["share_dla"] == 0.0)
    assert np.all(found["share_sub_dla"] == 0.0)
    assert_allclose(found["share_forest"] + found["share_lls"], 1.0, rtol=1e-12)
    assert np.all(values("incidence", draws)["lx_dla"] == 0.0)
    assert np.all(values("incidence", draws)["lx_lls_tau1"] > 0.0)


def test_files_have_bands_units_and_provenance(tmp_path):
    theta = THETA + 0.02 * np.random.default_rng(1).standard_normal((30, 13))
    draws = Draws(theta, SETTING, ANALYSIS.derive)
    write_derived(draws, tmp_path, with_bands=True, fingerprint="abc")
    for name in DERIVED_TABLES:
        table = read_table(tmp_path / f"{name}.ecsv")
        assert table.meta["fingerprint"] == "abc"
        assert table.meta["definition"] == DERIVED_TABLES[name].definition
        medians = [column for column in table.colnames if column.endswith("median")]
        assert medians
        for median in medians:
            low, high = (median.replace("median", end) for end in ("lo68", "hi68"))
            assert np.all(table[low] <= table[median])
            assert np.all(table[median] <= table[high])
