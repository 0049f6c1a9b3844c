"""Every quantity on distributions for which its integral has a closed form."""

import dataclasses

import numpy as np
import pytest
from astropy import units
from numpy.testing import assert_allclose, assert_array_equal

from fogline.atomic import LYMAN_ALPHA, SIGMA_912, log_nhi_at_tau
from fogline.cosmology import C_KM_S, Cosmology
from fogline.datasets import hypothetical
from fogline.distribution import ColumnDistribution
from fogline.quantities import FILE_SPECS, QUANTITIES, Setting
from fogline.quantities.hi_density import mass_per_moment
from fogline.quantities.mean_free_path import length_unit
from fogline.response import build_response
from small_study import COSMOLOGY, MODEL, PIVOTS, in_bins

BETA, LOG_A = 1.6, 8.0
# A straight line through the pivots: f = 10^8 N^-1.6 at every redshift.
POWER_LAW = np.array([*(LOG_A - BETA * np.array(PIVOTS)), 0.0, 0.0, 0.0])
SETTING = Setting(ColumnDistribution.from_settings(MODEL), Cosmology(70.0, 0.3), MODEL.doppler)


def predict(data, theta=POWER_LAW, setting=SETTING):
    return build_response([data], setting).predict(theta)


def moment(low, high, power=0.0):
    """∫ N^power f dN of the power law."""
    k = power + 1.0 - BETA
    return 10.0**LOG_A * (10.0 ** (k * high) - 10.0 ** (k * low)) / k


def test_registry_holds_every_kind_of_file():
    assert set(QUANTITIES) == set(FILE_SPECS)
    for name, quantity in QUANTITIES.items():
        assert quantity.spec is FILE_SPECS[name]
        assert quantity.label


def test_incidence_of_a_power_law():
    data = hypothetical("lls_incidence", [2.0, 3.0], per="dX", tau_min=2.0)
    low = float(log_nhi_at_tau(2.0))
    assert_allclose(predict(data), moment(low, 22.5), rtol=1e-6)
    per_dz = hypothetical("lls_incidence", [2.0, 3.0], per="dz", tau_min=2.0)
    # dX/dz of flat ΛCDM with Om0 = 0.3 at z = 2 and 3 (closed form, published.md: derived).
    assert_allclose(predict(per_dz) / predict(data), [3.0339, 3.5867], rtol=2e-5)


def test_column_limit_and_optical_depth_are_two_words_for_one_thing():
    by_tau = hypothetical("lls_incidence", [2.4], per="dX", tau_min=2.0)
    by_column = hypothetical(
        "lls_incidence", [2.4], per="dX", log_nhi_min=float(np.log10(2.0 / SIGMA_912))
    )
    assert_array_equal(predict(by_tau), predict(by_column))
    # Common practice: τ = 2 at 17.50, τ = 1 at 17.20.
    assert float(log_nhi_at_tau(2.0)) == pytest.approx(17.50, abs=0.005)
    assert float(log_nhi_at_tau(1.0)) == pytest.approx(17.20, abs=0.005)


def test_counts_are_incidence_times_path():
    rate = hypothetical("lls_incidence", [2.4, 3.0], per="dz", log_nhi_min=17.5)
    counted = dataclasses.replace(rate, counts=True, search_path=np.array([12.5, 40.0]))
    assert_allclose(predict(counted), predict(rate) * [12.5, 40.0], rtol=1e-14)


def test_bin_average_of_a_power_law():
    edges = [20.3, 20.8, 21.3]
    bins = in_bins(hypothetical("column_distribution", [2.4] * 2, per="dX"), edges)
    expected = [
        np.log10(moment(low, high) / (10.0**high - 10.0**low))
        for low, high in ((20.3, 20.8), (20.8, 21.3))
    ]
    assert_allclose(predict(bins), expected, rtol=1e-8)
    # Not f at the centre, from which it differs by 3%  even at a slope of -1.6.
    assert np.all(np.abs(np.array(expected) - (LOG_A - BETA * np.array([20.55, 21.05]))) > 0.01)


def test_counts_in_column_bins():
    edges = [20.3, 20.8, 21.3]
    bins = hypothetical("column_distribution", [2.4] * 2, per="dX")
    bins = in_bins(bins, edges, counts=True, search_path=np.array([1000.0, 2000.0]))
    expected = [1000.0 * moment(20.3, 20.8), 2000.0 * moment(20.8, 21.3)]
    assert_allclose(predict(bins), expected, rtol=1e-7)


def test_lya_opacity_of_thin_absorbers_is_the_first_moment():
    setting = dataclasses.replace(
        SETTING, distribution=ColumnDistribution(2.5, (8.0, 9.0, 10.0), (9.0,))
    )
    theta = np.array([*(LOG_A - BETA * np.array([8.0, 9.0, 10.0])), 0.0])
    data = hypothetical("lya_opacity", [2.4], form="tau", log_nhi_min=8.0, log_nhi_max=10.0)
    # W = λ · 8.853e-13 N f λ[cm] where the line is thin (published.md: derived).
    wavelength = LYMAN_ALPHA.wavelength * 1e-8
    per_column = 8.853e-13 * LYMAN_ALPHA.f * wavelength
    expected = 3.4 * SETTING.cosmology.dx_dz(2.4) * per_column * moment(8.0, 10.0, 1.0)
    # At log N = 10 a line has τ_0 = 3e-4.
    assert_allclose(predict(data, theta, setting), expected, rtol=3e-4)


def test_forms_of_lya_opacity():
    tau, flux, decrement = (
        predict(
            hypothetical("lya_opacity", [2.4, 3.6], form=form, log_nhi_min=12.0, log_nhi_max=17.2)
        )
        for form in ("tau", "mean_flux", "decrement")
    )
    assert_allclose(flux, np.exp(-tau), rtol=1e-14)
    assert_allclose(decrement, 1.0 - flux, rtol=1e-12)


def test_mean_flux_of_a_bin_is_not_the_flux_of_the_mean_depth():
    def of(form):
        data = hypothetical("lya_opacity", [2.0], form=form, log_nhi_min=12.0, log_nhi_max=17.2)
        theta = np.array([*POWER_LAW[:10] + 1.7, 3.0, 3.0, 3.0])
        return predict(dataclasses.replace(data, z_hi=np.array([5.0])), theta)[0]

    assert of("mean_flux") > 1.05 * np.exp(-of("tau"))  # Jensen's inequality, and not by a little


def local_path(**meta):
    return hypothetical(
        "mean_free_path", [2.0, 4.0], **{"unit": "Mpc", "definition": "local"} | meta
    )


def test_local_free_path_of_thin_absorbers():
    # σ ∫ N f dN while N σ << 1; columns up to 10^14 have N σ = 6e-4.
    pivots = (12.0, 13.0, 14.0)
    setting = dataclasses.replace(SETTING, distribution=ColumnDistribution(2.5, pivots, (13.0,)))
    theta = np.array([*(LOG_A - BETA * np.array(pivots)), 0.0])
    dtau_dx = SIGMA_912 * moment(12.0, 14.0, 1.0)
    # dl/dX = c / (H0 (1+z)^3)
    expected = C_KM_S / 70.0 / np.array([3.0, 5.0]) ** 3 / dtau_dx
    assert_allclose(predict(local_path(frame="proper"), theta, setting), expected, rtol=3e-4)


def test_comoving_lengths_are_longer_by_one_plus_z():
    ratio = predict(local_path(frame="comoving")) / predict(local_path(frame="proper"))
    assert_allclose(ratio, [3.0, 5.0], rtol=1e-14)


def test_lengths_in_units_of_1_over_h():
    assert length_unit("Mpc", Cosmology(72.0, 0.3)) == pytest.approx(1.0, rel=1e-14)
    # 100 Mpc are 72 Mpc/h where h = 0.72.
    assert length_unit("Mpc / littleh", Cosmology(72.0, 0.3)) == pytest.approx(0.72, rel=1e-12)
    with_h = predict(local_path(frame="proper", unit="Mpc / littleh"))
    assert_allclose(with_h / predict(local_path(frame="proper")), 0.7, rtol=1e-12)


def test_lengths_are_those_of_the_files_cosmology():
    data = dataclasses.replace(local_path(frame="proper"), cosmology=Cosmology(35.0, 0.3))
    # Absorbers per dz are the same, lengths twice as long.
    assert_allclose(predict(data), 2.0 * predict(local_path(frame="proper")), rtol=1e-12)


def test_unit_depth_path_tends_to_the_local_one_where_paths_are_short():
    theta = POWER_LAW + np.array([3.5] * 10 + [0.0] * 3)
    local = predict(local_path(frame="proper"), theta)
    unit_depth = predict(local_path(frame="proper", definition="unit_depth"), theta)
    assert np.all(local < 10.0)
    assert np.all(unit_depth > local)  # lines of sight run into fewer absorbers, and redshift
    assert_allclose(unit_depth, local, rtol=0.03)


def test_hi_mass_of_a_power_law():
    data = hypothetical("hi_density", [2.4], form="omega_hi", log_nhi_min=20.3, log_nhi_max=21.6)
    # Ω_HI = 1.376e-23 ∫ N f dN for H0 = 70 (physics.md: derived, four digits).
    assert_allclose(predict(data), 1.376e-23 * moment(20.3, 21.6, 1.0), rtol=4e-4)


def test_mass_per_moment_over_the_critical_density():
    cosmology = Cosmology(70.0, 0.3)
    omega = mass_per_moment(cosmology) / cosmology.critical_density
    assert omega == pytest.approx(1.376e-23, abs=0.0005e-23)
    # ρ goes with H0, ρ_crit with its square.
    half = Cosmology(35.0, 0.3)
    assert mass_per_moment(half) == pytest.approx(0.5 * mass_per_moment(cosmology), rel=1e-13)


def test_forms_and_units_of_hi_density():
    def value(unit="", **meta):
        return predict(hypothetical("hi_density", [2.4], unit=unit, log_nhi_min=20.3, **meta))[0]

    rho = value("Msun / Mpc3", form="rho_hi")
    omega = value(form="omega_hi")
    assert rho / omega == pytest.approx(Cosmology(70.0, 0.3).critical_density, rel=1e-13)
    assert value(form="omega_gas", helium_factor=1.3) == pytest.approx(1.3 * omega, rel=1e-13)
    in_grams = value("g / cm3", form="rho_hi")
    assert in_grams == pytest.approx(rho * (units.Msun / units.Mpc**3).to("g / cm3"), rel=1e-12)


def test_data_per_absorption_distance_know_their_cosmology():
    other = Cosmology(70.0, 1.0, 0.0)
    scale = SETTING.cosmology.dx_dz(2.4) / other.dx_dz(2.4)
    assert scale > 1.5
    for quantity, meta in (
        ("lls_incidence", {"per": "dX", "tau_min": 2.0}),
        ("hi_density", {"form": "rho_hi", "unit": "Msun / Mpc3", "log_nhi_min": 20.3}),
    ):
        data = hypothetical(quantity, [2.4], **meta)
        there = predict(dataclasses.replace(data, cosmology=other))
        # Ω and X enter the mass in the same way: the same absorbers per dz on a shorter path.
        assert_allclose(there / predict(data), scale, rtol=1e-12)
    counted = hypothetical("lls_incidence", [2.4], per="dz", tau_min=2.0)
    there = predict(dataclasses.replace(counted, cosmology=other))
    assert_allclose(there, predict(counted), rtol=1e-14)
    assert COSMOLOGY.Om0 == 0.3  # the results' own, which the numbers above assume
