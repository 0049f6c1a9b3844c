"""Every prediction against adaptive quadrature over random splines, far steeper than any posterior.

`reference_integrals` writes every definition out a second time and shares no code with fogline. The
tolerance is 5e-5 relative, half of what fogline promises, although slopes here jump from 0.1 to 5
between neighbouring intervals; plausible splines agree to 1e-6.
"""

import dataclasses
from functools import lru_cache

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

import reference_integrals as reference
from fogline.atomic import equivalent_width, photoionization_cross_section
from fogline.cosmology import Cosmology
from fogline.datasets import hypothetical
from fogline.distribution import ColumnDistribution
from fogline.quantities import Setting
from fogline.response import build_response
from fogline.unit_depth import continuum_weights, redshift_grid
from reference_integrals import Truth, background, bin_mean, dx_dz

RTOL = 5e-5
DOPPLER = 26.0
LOG_NHI_TAU_2 = np.log10(2.0 / 6.304e-18)

RESULTS = {"H0": 70.0, "Om0": 0.3}
OTHERS = [
    {"H0": 72.0, "Om0": 0.26},
    {"H0": 67.7, "Om0": 0.31, "Ode0": 0.75},  # closed
    {"H0": 50.0, "Om0": 1.0, "Ode0": 0.0},
]

FEW = settings(derandomize=True, max_examples=12, deadline=None, database=None)
FEWER = settings(FEW, max_examples=6)

PIVOTS = [
    (12.0, 13.5, 15.0, 16.2, 17.5, 19.0, 20.3, 21.0, 21.6, 22.5),
    (12.0, 14.5, 15.1, 17.2, 18.0, 20.3, 21.2, 22.5),
]


@st.composite
def truths(draw):
    """Falling splines with random slopes and evolution; opacity at z = 3 from thin to thick."""
    pivots = draw(st.sampled_from(PIVOTS))
    slope = st.floats(0.1, 5.0)
    slopes = draw(st.lists(slope, min_size=len(pivots) - 1, max_size=len(pivots) - 1))
    exponents = draw(st.lists(st.floats(-2.0, 6.0), min_size=3, max_size=3))
    log_f = -np.concatenate([[0.0], np.cumsum(np.array(slopes) * np.diff(pivots))])
    z_ref = draw(st.sampled_from([2.5, 3.0]))
    truth = Truth(
        z_ref, pivots, tuple(log_f), (14.0, 17.5, 20.3), tuple(exponents), background(**RESULTS)
    )
    return truth.scaled(10.0 ** draw(st.floats(-0.5, 1.3)) / truth.opacity(3.0))


def setting_of(truth, doppler=None, cosmology=None):
    distribution = ColumnDistribution(truth.z_ref, truth.pivots, truth.evolution_pivots)
    doppler = doppler or {"dist": "fixed", "b": DOPPLER}
    return Setting(distribution, Cosmology(**(cosmology or RESULTS)), doppler)


def rows(quantity, bins, *, cosmology=None, columns=None, path=None, **meta):
    """Rows of one data set: redshift bins, optional column bins and search paths."""
    z_lo, z_hi = np.array(bins, dtype=float).T
    data = hypothetical(quantity, z_lo, **meta)
    changes = {"z_hi": z_hi, "cosmology": Cosmology(**cosmology) if cosmology else None}
    if columns is not None:
        low, high = np.array(columns, dtype=float).T
        changes |= {"log_nhi_lo": low, "log_nhi_hi": high}
    if path is not None:
        changes |= {"search_path": np.array(path, dtype=float), "counts": True}
    return dataclasses.replace(data, **changes)


def predict(truth, data, **setting):
    return build_response([data], setting_of(truth, **setting)).predict(truth.theta)


def means(value, data, truth, other):
    """Means over the rows' bins, weighted by the data's absorption distance."""
    weighting = truth.cosmology if other is None else background(**other)
    return np.array(
        [bin_mean(value, lo, hi, weighting) for lo, hi in zip(data.z_lo, data.z_hi, strict=True)]
    )


# What the reference itself rests on.


def test_reference_widths_hold_their_interpolation():
    width = reference.width_of(DOPPLER)
    for log_nhi in (12.05, 13.9, 15.4, 17.3, 18.8, 20.6, 22.4):
        assert width(log_nhi) == pytest.approx(reference.voigt_width(log_nhi, DOPPLER), rel=1e-8)


@FEW
@given(truths())
def test_reference_with_dense_nodes_is_what_adaptive_quadrature_gives(truth):
    for energy_ratio in (1.0, 2.5):
        adaptive = truth.opacity(2.7, energy_ratio)
        assert truth.dense.opacity(2.7, energy_ratio) == pytest.approx(adaptive, rel=1e-9)
    for quantity in (reference.rho_hi, reference.tau_lya):
        rest = (truth.cosmology,) if quantity is reference.rho_hi else (DOPPLER,)
        adaptive = quantity(truth, 2.7, 12.7, 22.1, *rest)
        assert quantity(truth.dense, 2.7, 12.7, 22.1, *rest) == pytest.approx(adaptive, rel=1e-9)


# Arbitrary precision, for a few points.


@pytest.mark.parametrize("log_nhi", [13.3, 17.0, 20.7])
def test_equivalent_width_to_thirty_digits(log_nhi):
    with mpmath.workdps(30):
        b, wavelength = mpmath.mpf(DOPPLER) * 10**5, mpmath.mpf("1215.6701e-8")
        area = mpmath.mpf("0.02654008854")  # pi e^2 / (m_e c) [cm^2 Hz], CODATA 2018
        a = mpmath.mpf("6.265e8") * wavelength / (4 * mpmath.pi * b)
        scale = mpmath.mpf(10) ** log_nhi * area * mpmath.mpf("0.4164") * wavelength
        scale /= mpmath.sqrt(mpmath.pi) * b

        def absorbed(x):
            zeta = mpmath.mpc(x, a)
            voigt = mpmath.re(mpmath.exp(-(zeta**2)) * mpmath.erfc(-1j * zeta))
            return 1 - mpmath.exp(-scale * voigt)

        def wing(u):  # x = 1/u; H = a/(sqrt(pi) x^2) (1 + 3/(2 x^2)) there, to 1e-15
            voigt = a * u**2 / mpmath.sqrt(mpmath.pi) * (1 + mpmath.mpf(3) / 2 * u**2)
            return (1 - mpmath.exp(-scale * voigt)) / u**2

        near = mpmath.quad(absorbed, [0, 1, 2, 3, 4, 5, 6, 7.5])
        near += mpmath.quad(absorbed, [7.5, 15, 40, 200, 1000, 5000])
        far = mpmath.quad(wing, [mpmath.mpf(10) ** -20, mpmath.mpf("0.0002")])
        expected = 2 * (near + far) * wavelength * b / mpmath.mpf("2.99792458e10") * 10**8
    assert equivalent_width(log_nhi, DOPPLER) == pytest.approx(float(expected), rel=2e-6)


def test_local_opacity_of_a_power_law_to_thirty_digits():
    # One straight line through all pivots: f = A N^-1.6 exactly, and gamma functions do the rest.
    pivots = PIVOTS[0]
    truth = Truth(
        2.5,
        pivots,
        tuple(8.0 - 1.6 * p for p in pivots),
        (14.0, 17.5, 20.3),
        (0.0, 0.0, 0.0),
        background(**RESULTS),
    )
    data = hypothetical("mean_free_path", [2.5], unit="Mpc", definition="local", frame="proper")
    with mpmath.workdps(30):
        sigma, amplitude = mpmath.mpf("6.304e-18"), mpmath.mpf(10) ** 8

        def integrand(ln_n):
            return (
                amplitude
                * mpmath.exp(-ln_n * mpmath.mpf("0.6"))
                * -mpmath.expm1(-mpmath.exp(ln_n) * sigma)
            )

        ln10 = mpmath.log(10)
        opacity = mpmath.quad(integrand, [p * ln10 for p in pivots])
        expected = 299792.458 / (3.5**3 * 70.0) / float(opacity)  # H cancels but for H0
    assert predict(truth, data)[0] == pytest.approx(expected, rel=1e-6)


def test_cross_section_to_thirty_digits():
    for ratio in (1.0000001, 1.3, 2.0, 4.4):
        with mpmath.workdps(30):
            eps = mpmath.sqrt(mpmath.mpf(ratio) - 1)
            shape = mpmath.exp(4 - 4 * mpmath.atan(eps) / eps) / (
                1 - mpmath.exp(-2 * mpmath.pi / eps)
            )
            expected = mpmath.mpf("6.304e-18") * shape / mpmath.mpf(ratio) ** 4
        # At 1 + 1e-7 the ratio itself carries 1e-9.
        assert photoionization_cross_section(ratio) == pytest.approx(float(expected), rel=1e-8)


# Lyα opacity.

FORMS = {"tau": lambda tau: tau, "mean_flux": lambda tau: np.exp(-tau)}
FORMS["decrement"] = lambda tau: 1.0 - np.exp(-tau)


@pytest.mark.parametrize("columns", [(12.0, 17.2), (12.7, 22.5), (13.5, 16.2)])
@FEW
@given(truths(), st.floats(0.02, 2.0))
def test_lya_opacity(columns, truth, thickest):
    truth = truth.scaled(thickest / reference.tau_lya(truth, 4.4, *columns, DOPPLER))
    z = [2.1, 3.0, 4.4]
    tau = np.array([reference.tau_lya(truth, x, *columns, DOPPLER) for x in z])
    for form, of_tau in FORMS.items():
        data = hypothetical(
            "lya_opacity", z, form=form, log_nhi_min=columns[0], log_nhi_max=columns[1]
        )
        assert_allclose(predict(truth, data), of_tau(tau), rtol=RTOL, err_msg=form)


@pytest.mark.parametrize("other", [None, OTHERS[2]])
@FEWER
@given(truths(), st.floats(0.02, 2.0))
def test_lya_opacity_in_redshift_bins(other, truth, thickest):
    truth = truth.scaled(thickest / reference.tau_lya(truth, 4.4, 12.0, 17.2, DOPPLER))
    for form, of_tau in FORMS.items():
        data = rows(
            "lya_opacity",
            [(2.0, 2.2), (2.6, 3.4), (3.9, 4.4)],
            cosmology=other,
            form=form,
            log_nhi_min=12.0,
            log_nhi_max=17.2,
        )
        expected = means(
            lambda z: of_tau(reference.tau_lya(truth.dense, z, 12.0, 17.2, DOPPLER)),  # noqa: B023
            data,
            truth,
            other,
        )
        assert_allclose(predict(truth, data), expected, rtol=RTOL, err_msg=form)


@FEWER
@given(truths())
def test_lya_opacity_averaged_over_doppler_parameters(truth):
    data = hypothetical("lya_opacity", [2.4], form="tau", log_nhi_min=12.0, log_nhi_max=17.2)
    doppler = {"dist": "uniform", "loc": 18.0, "scale": 20.0}
    nodes, weights = np.polynomial.legendre.leggauss(10)
    tau = [reference.tau_lya(truth.dense, 2.4, 12.0, 17.2, 28.0 + 10.0 * x) for x in nodes]
    expected = 0.5 * weights @ tau
    assert predict(truth, data, doppler=doppler)[0] == pytest.approx(expected, rel=RTOL)


# Incidence.

LIMITS = [
    ({"tau_min": 2.0}, (LOG_NHI_TAU_2, 22.5)),
    ({"log_nhi_min": 19.0, "log_nhi_max": 20.3}, (19.0, 20.3)),
    ({"log_nhi_min": 16.4, "log_nhi_max": 17.44}, (16.4, 17.44)),
]


@pytest.mark.parametrize("other", [None, *OTHERS])
@pytest.mark.parametrize("per", ["dz", "dX"])
@FEWER
@given(truths())
def test_incidence_and_counts(per, other, truth):
    bins = [(2.2, 2.2), (3.0, 3.6), (4.0, 4.1)]
    path = [3.0, 41.0, 7.5]
    counted_in = truth.cosmology if other is None else background(**other)
    for meta, (low, high) in LIMITS:

        def incidence(z, low=low, high=high):
            value = truth.dense.integral(low, high, z) * dx_dz(truth.cosmology, z)
            return value if per == "dz" else value / dx_dz(counted_in, z)

        data = rows("lls_incidence", bins, cosmology=other, per=per, **meta)
        expected = means(incidence, data, truth, other)
        assert_allclose(predict(truth, data), expected, rtol=RTOL)
        counted = rows("lls_incidence", bins, cosmology=other, path=path, per=per, **meta)
        assert_allclose(predict(truth, counted), expected * path, rtol=RTOL)


# Mean free path.

FRAMES = [("proper", "Mpc"), ("comoving", "Mpc"), ("proper", "Mpc / littleh")]


def in_unit(lengths, unit, other):
    h = (other or RESULTS)["H0"] / 100.0
    return lengths * (h if "littleh" in unit else 1.0)


@pytest.mark.parametrize("other", [None, *OTHERS])
@pytest.mark.parametrize(("frame", "unit"), FRAMES)
@FEWER
@given(truths())
def test_local_free_path(frame, unit, other, truth):
    data = rows(
        "mean_free_path",
        [(2.4, 2.4), (5.2, 5.2), (3.0, 3.7)],
        cosmology=other,
        unit=unit,
        definition="local",
        frame=frame,
    )
    measured_in = background(**(other or RESULTS))

    def length(z):
        return reference.local_free_path(truth.dense, z, measured_in, frame == "comoving")

    expected = in_unit(means(length, data, truth, other), unit, other)
    assert_allclose(predict(truth, data), expected, rtol=RTOL)


@pytest.mark.parametrize(
    ("frame", "unit", "other"),
    [(*FRAMES[0], None), (*FRAMES[1], OTHERS[0]), (*FRAMES[2], OTHERS[1])],
)
@FEW
@given(truths())
def test_unit_depth_free_path(frame, unit, other, truth):
    z = [2.0, 2.44, 3.0, 4.0, 5.2]
    data = rows(
        "mean_free_path",
        [(x, x) for x in z],
        cosmology=other,
        unit=unit,
        definition="unit_depth",
        frame=frame,
    )
    measured_in = background(**(other or RESULTS))
    lengths = [
        reference.unit_depth_free_path(truth, x, measured_in, frame == "comoving") for x in z
    ]
    # Infinite where the depth stays below one down to redshift 0: both must say so.
    expected = in_unit(np.array(lengths), unit, other)
    assert_allclose(predict(truth, data), expected, rtol=RTOL)


@settings(FEW, max_examples=2)
@given(truths())
def test_unit_depth_free_path_in_redshift_bins(truth):
    truth = truth.scaled(10.0 / (truth.opacity(2.4) * dx_dz(truth.cosmology, 2.4)))
    data = rows(
        "mean_free_path",
        [(3.0, 3.2), (3.5, 4.1)],
        unit="Mpc",
        definition="unit_depth",
        frame="proper",
    )

    @lru_cache
    def length(z):
        return reference.unit_depth_free_path(truth, z, truth.cosmology)

    assert_allclose(predict(truth, data), means(length, data, truth, None), rtol=RTOL)


def test_free_path_beyond_reach_is_infinite_in_its_own_row_alone():
    shape = Truth(
        2.5,
        PIVOTS[0],
        tuple(8.0 - 1.6 * p for p in PIVOTS[0]),
        (14.0, 17.5, 20.3),
        (2.0, 2.0, 2.0),
        background(**RESULTS),
    )
    # The depth is not monotone: the farther the path, the harder the photons met on it.
    deepest = max(shape.tau_continuum(z, 2.2) for z in np.linspace(0.0, 2.1, 43))
    truth = shape.scaled(0.97 / deepest)
    assert truth.tau_continuum(0.0, 2.2) < 0.9
    assert truth.tau_continuum(0.0, 5.0) > 1.0
    bins = [(2.2, 2.2), (5.0, 5.0), (2.1, 2.2)]
    data = rows("mean_free_path", bins, unit="Mpc", definition="unit_depth", frame="proper")
    predicted = predict(truth, data)
    assert np.isinf(predicted[[0, 2]]).all()
    expected = reference.unit_depth_free_path(truth, 5.0, truth.cosmology)
    assert predicted[1] == pytest.approx(expected, rel=RTOL)


@FEW
@given(truths(), st.sampled_from([(2.0, 2.9), (3.1, 3.3), (0.0, 2.5)]))
def test_continuum_optical_depth(truth, ends):
    setting = setting_of(truth)
    grid = redshift_grid(ends[1])
    log_nhi, weights = continuum_weights(*ends, grid, setting.distribution, setting.cosmology)
    f = 10.0 ** np.array([setting.distribution.log_f(truth.theta, log_nhi, z) for z in grid])
    assert np.sum(f * weights) == pytest.approx(truth.tau_continuum(*ends), rel=RTOL)


# Column-density distribution and H I density.

COLUMNS = [(12.5, 13.0), (14.9, 15.1), (20.3, 20.5), (20.9, 21.4), (17.5, 19.0), (21.0, 22.5)]


@pytest.mark.parametrize("other", [None, *OTHERS[:2]])
@pytest.mark.parametrize("per", ["dz", "dX"])
@FEWER
@given(truths())
def test_column_distribution(per, other, truth):
    bins = [(2.4, 2.4), (2.6, 3.2)] * 3
    counted_in = truth.cosmology if other is None else background(**other)
    data = rows("column_distribution", bins, cosmology=other, columns=COLUMNS, per=per)
    expected = []
    for (low, high), row in zip(COLUMNS, range(len(bins)), strict=True):

        def number(z, low=low, high=high):
            value = truth.dense.integral(low, high, z) * dx_dz(truth.cosmology, z)
            return value if per == "dz" else value / dx_dz(counted_in, z)

        expected.append(bin_mean(number, *bins[row], counted_in))
    widths = np.array([10.0**high - 10.0**low for low, high in COLUMNS])
    assert_allclose(10.0 ** predict(truth, data), np.array(expected) / widths, rtol=RTOL)
    path = np.geomspace(1.0, 300.0, len(bins))
    counted = rows(
        "column_distribution", bins, cosmology=other, columns=COLUMNS, path=path, per=per
    )
    assert_allclose(predict(truth, counted), np.array(expected) * path, rtol=RTOL)


@pytest.mark.parametrize("other", [None, *OTHERS])
@FEWER
@given(truths())
def test_hi_density(other, truth):
    bins = [(2.1, 2.1), (2.4, 3.1), (4.4, 4.4)]
    measured_in = background(**(other or RESULTS))
    cases = [
        ({"form": "rho_hi", "unit": "Msun / Mpc3"}, reference.rho_hi, 1.0),
        ({"form": "rho_hi", "unit": "kg / Mpc3"}, reference.rho_hi, 1.988409870698051e30),
        ({"form": "omega_hi"}, reference.omega_hi, 1.0),
        ({"form": "omega_gas", "helium_factor": 1.3}, reference.omega_hi, 1.3),
    ]
    for low, high in [(20.3, None), (19.0, 20.3), (12.0, 21.7)]:
        limits = {"log_nhi_min": low} | ({} if high is None else {"log_nhi_max": high})

        @lru_cache
        def moment(z, low=low, high=high):
            return reference.rho_hi(truth.dense, z, low, high or 22.5, measured_in)

        for meta, density, factor in cases:
            data = rows("hi_density", bins, cosmology=other, **limits, **meta)
            expected = factor * means(moment, data, truth, other)
            if density is reference.omega_hi:
                expected *= reference.omega_hi(truth, 2.5, low, high or 22.5, measured_in)
                expected /= moment(2.5)
            assert_allclose(predict(truth, data), expected, rtol=RTOL, err_msg=str(meta))


def test_plausible_splines_agree_to_2e_6():
    truth, z = fogged(), [2.4, 3.0, 4.0]
    unit_depth = {"unit": "Mpc", "definition": "unit_depth", "frame": "proper"}
    data = [
        hypothetical("lya_opacity", z, form="tau", log_nhi_min=12.0, log_nhi_max=17.2),
        hypothetical("lls_incidence", z, per="dz", tau_min=2.0),
        hypothetical("mean_free_path", z, **unit_depth),
        hypothetical("hi_density", z, form="omega_hi", log_nhi_min=20.3),
    ]
    predicted = build_response(data, setting_of(truth)).predict(truth.theta)
    expected = [
        [reference.tau_lya(truth, x, 12.0, 17.2, DOPPLER) for x in z],
        [truth.integral(LOG_NHI_TAU_2, 22.5, x) * dx_dz(truth.cosmology, x) for x in z],
        [reference.unit_depth_free_path(truth, x, truth.cosmology) for x in z],
        [reference.omega_hi(truth, x, 20.3, 22.5, truth.cosmology) for x in z],
    ]
    assert_allclose(predicted, np.ravel(expected), rtol=2e-6)


# Controls: definitions that must not be mistaken for one another.


def fogged(z_ref=2.5):
    """A plausible distribution, within a factor of two of what is published at 2 < z < 5."""
    log_f = (-9.7, -11.65, -14.3, -16.5, -18.5, -20.15, -21.6, -22.6, -23.75, -26.5)
    return Truth(
        z_ref, PIVOTS[0], log_f, (14.0, 17.5, 20.3), (1.9, 2.0, 0.6), background(**RESULTS)
    )


def test_definitions_differ_by_far_more_than_the_tolerance():
    truth = fogged()
    paths = {
        definition: predict(
            truth,
            hypothetical(
                "mean_free_path", [2.44, 5.2], unit="Mpc", definition=definition, frame="proper"
            ),
        )
        for definition in ("local", "unit_depth")
    }
    ratio = paths["unit_depth"] / paths["local"]
    assert ratio[0] > 1.3  # redshifting and dilution of absorbers lengthen the path at low z
    assert 1.0 < ratio[1] < 1.15  # and hardly matter over 10 Mpc
    steep = [(21.6, 22.4)]
    data = rows("column_distribution", [(2.5, 2.5)], columns=steep, per="dX")
    centre = np.log10(truth.f(np.mean(steep), 2.5))
    # The bin's mean is not its centre.
    assert abs(predict(truth, data)[0] - centre) > 0.1


def test_counts_on_the_sky_do_not_know_the_cosmology_of_the_results():
    # With f re-expressed per dX of another cosmology, everything counted per dz is as before.
    truth = fogged()
    other = OTHERS[2]
    scale = dx_dz(truth.cosmology, 3.0) / dx_dz(background(**other), 3.0)
    assert abs(scale - 1.0) > 0.2
    data = [
        hypothetical("lya_opacity", [3.0], form="tau", log_nhi_min=12.0, log_nhi_max=17.2),
        hypothetical("lls_incidence", [3.0], per="dz", tau_min=2.0),
        rows(
            "mean_free_path",
            [(3.0, 3.0)],
            cosmology=RESULTS,
            unit="Mpc",
            definition="local",
            frame="proper",
        ),
        rows("hi_density", [(3.0, 3.0)], cosmology=RESULTS, form="omega_hi", log_nhi_min=20.3),
    ]
    here = build_response(data, setting_of(truth)).predict(truth.theta)
    there = build_response(data, setting_of(truth, cosmology=other))
    assert_allclose(there.predict(truth.scaled(scale).theta), here, rtol=1e-12)
