"""Breaks in redshift, forms of high columns and a free Doppler argument against quadrature.

As in ``test_accuracy``: the truths are written out again without fogline, splines are far steeper
than any posterior, and the tolerance is half of what fogline promises.
"""

import dataclasses
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.integrate import quad
from test_accuracy import FEW, FEWER, LOG_NHI_TAU_2, RESULTS, RTOL, rows, setting_of, truths

import reference_integrals as reference
from fogline.distribution import ColumnDistribution
from fogline.doppler import doppler_grid, mean_equivalent_width
from fogline.quantities import Setting
from fogline.response import build_response
from reference_integrals import Truth, dx_dz


@dataclass(frozen=True, repr=False)
class BrokenTruth(Truth):
    """Exponents that change at breaks in redshift."""

    breaks: tuple[float, ...] = ()
    later: tuple[tuple[float, ...], ...] = ()

    @property
    def theta(self):
        return np.array([*self.log_f, *self.exponents, *np.ravel(self.later)])

    def f(self, log_nhi, z):
        """Return f [cm^2]: the exponents integrated over ln(1+z) from the reference to z."""
        log_f = self._spline(log_nhi)
        edges = [-0.999, *self.breaks, 1e3]
        for exponents, (lo, hi) in zip((self.exponents, *self.later), pairwise(edges), strict=True):
            gamma = np.interp(log_nhi, self.evolution_pivots, exponents)
            inside = [min(max(x, lo), hi) for x in (z, self.z_ref)]
            log_f = log_f + gamma * np.log10((1.0 + inside[0]) / (1.0 + inside[1]))
        return 10.0**log_f

    def tau_continuum(self, z_912, z_em):
        edges = [z_912, *(b for b in self.breaks if z_912 < b < z_em), z_em]

        def integrand(z):
            ratio = (1.0 + z) / (1.0 + z_912)
            return dx_dz(self.cosmology, z) * self.dense.opacity(z, ratio)

        return sum(quad(integrand, *ends, epsabs=1e-8, epsrel=1e-7)[0] for ends in pairwise(edges))


@st.composite
def broken_truths(draw):
    base = draw(truths())
    breaks = draw(st.sampled_from([(2.2,), (3.1,), (2.4, 3.5)]))
    exponents = st.lists(st.floats(-2.0, 6.0), min_size=3, max_size=3)
    later = tuple(tuple(draw(exponents)) for _ in breaks)
    fields = {f.name: getattr(base, f.name) for f in dataclasses.fields(base)}
    truth = BrokenTruth(**fields, breaks=breaks, later=later)
    return truth.scaled(10.0 ** draw(st.floats(-0.5, 1.3)) / truth.opacity(3.0))


def broken_setting(truth):
    plain = setting_of(truth)
    distribution = dataclasses.replace(plain.distribution, breaks=truth.breaks)
    return dataclasses.replace(plain, distribution=distribution)


BINS = [(2.0, 2.9), (3.05, 3.05), (3.0, 4.4)]


@FEW
@given(broken_truths())
def test_incidence_over_breaks(truth):
    data = rows("lls_incidence", BINS, per="dz", tau_min=2.0)
    top = truth.pivots[-1]

    def incidence(z):
        return dx_dz(truth.cosmology, z) * truth.dense.integral(LOG_NHI_TAU_2, top, z)

    def mean(lo, hi):
        if lo == hi:
            return incidence(lo)
        inside = [lo, *(b for b in truth.breaks if lo < b < hi), hi]
        total = weight = 0.0
        for ends in pairwise(inside):
            total += quad(lambda z: incidence(z) * dx_dz(truth.cosmology, z), *ends)[0]
            weight += quad(lambda z: dx_dz(truth.cosmology, z), *ends)[0]
        return total / weight

    predicted = build_response([data], broken_setting(truth)).predict(truth.theta)
    assert_allclose(predicted, [mean(*ends) for ends in BINS], rtol=RTOL)


@settings(FEWER, max_examples=10)
@given(broken_truths())
def test_unit_depth_free_path_over_breaks(truth):
    data = rows(
        "mean_free_path", [(z, z) for z in (2.6, 3.3, 4.4)],
        unit="Mpc", definition="unit_depth", frame="proper",
    )  # fmt: skip
    expected = [reference.unit_depth_free_path(truth, z, truth.cosmology) for z in (2.6, 3.3, 4.4)]
    predicted = build_response([data], broken_setting(truth)).predict(truth.theta)
    assert_allclose(predicted, expected, rtol=1e-4)


@FEW
@given(truths())
def test_one_exponent_is_the_special_case_of_equal_segments(truth):
    data = [
        rows("lls_incidence", BINS, per="dz", tau_min=2.0),
        rows("mean_free_path", [(3.3, 3.3)], unit="Mpc", definition="unit_depth", frame="proper"),
    ]
    plain = setting_of(truth)
    breaks = (2.3, 3.2)
    broken = dataclasses.replace(
        plain, distribution=dataclasses.replace(plain.distribution, breaks=breaks)
    )
    theta = np.array([*truth.log_f, *truth.exponents * 3])
    assert_allclose(
        build_response(data, broken).predict(theta),
        build_response(data, plain).predict(truth.theta),
        rtol=2e-5,
    )


# Forms of high columns

SHAPES = {
    "gamma": [(1.2, 21.3), (2.4, 20.9), (0.3, 21.8)],
    "double_power_law": [(1.8, 3.3, 21.37), (2.0, 6.0, 20.9), (0.5, 4.0, 21.75)],
    "discs": [(21.2,), (20.6,), (22.0,)],
}


@dataclass(frozen=True, repr=False)
class TruthWithForm(Truth):
    """A spline up to its last pivot, and a form above it."""

    form: str = ""
    shape: tuple[float, ...] = ()
    top: float = 22.5

    @property
    def theta(self):
        return np.array([*self.log_f, *self.exponents, *self.shape])

    def _relative(self, log_nhi):
        n = 10.0 ** np.asarray(log_nhi, dtype=float)
        if self.form == "gamma":
            slope, log_nc = self.shape
            return n**-slope * np.exp(-n / 10.0**log_nc)
        if self.form == "double_power_law":
            slope, steep, log_nb = self.shape
            x = n / 10.0**log_nb
            return np.where(x < 1.0, x**-slope, x**-steep)
        x = n / 10.0 ** self.shape[0]
        return np.where(x < 1.0, (1.0 - 2.0 * np.log(np.minimum(x, 1.0))) / x, x**-3.0)

    def f(self, log_nhi, z):
        join = self.pivots[-1]
        gamma = np.interp(log_nhi, self.evolution_pivots, self.exponents)
        evolved = 10.0 ** (gamma * np.log10((1.0 + z) / (1.0 + self.z_ref)))
        ratio = np.where(log_nhi > join, self._relative(log_nhi) / self._relative(join), 1.0)
        return 10.0 ** self._spline(np.minimum(log_nhi, join)) * ratio * evolved

    def pieces(self, lo, hi):
        corner = self.shape[-1]
        kinks = sorted({*self.pivots, *self.evolution_pivots, corner})
        return list(pairwise([lo, *(k for k in kinks if lo < k < hi), hi]))

    def opacity(self, z, energy_ratio=1.0):
        sigma = reference.cross_section(energy_ratio)
        ends = self.pivots[0], self.top
        return self.integral(*ends, z, lambda log_nhi: -np.expm1(-(10.0**log_nhi) * sigma))


@pytest.mark.parametrize(
    ("form", "shape"), [(form, shape) for form, many in SHAPES.items() for shape in many]
)
def test_forms_of_high_columns(form, shape):
    pivots = (12.0, 13.5, 15.0, 16.2, 17.5, 19.0, 20.3)
    log_f = (-9.7, -11.65, -14.3, -16.5, -18.5, -20.15, -21.6)
    truth = TruthWithForm(
        2.5, pivots, log_f, (14.0, 17.5, 20.3), (1.9, 2.0, 0.6),
        reference.background(**RESULTS), form=form, shape=shape,
    )  # fmt: skip
    distribution = ColumnDistribution(2.5, pivots, (14.0, 17.5, 20.3), form=form, top=22.5)
    setting = dataclasses.replace(setting_of(truth), distribution=distribution)
    columns = [(20.3, 20.5), (20.9, 21.4), (21.4, 22.5)]
    mass = rows("hi_density", [(3.0, 3.0)], form="rho_hi", unit="Msun / Mpc3", log_nhi_min=20.3)
    bins = rows("column_distribution", [(3.0, 3.0)] * 3, columns=columns, path=[1.0] * 3, per="dX")
    local = rows("mean_free_path", [(3.0, 3.0)], unit="Mpc", definition="local", frame="proper")
    expected = [
        reference.rho_hi(truth, 3.0, 20.3, 22.5, truth.cosmology),
        *(truth.integral(*ends, 3.0) for ends in columns),
        reference.local_free_path(truth, 3.0, truth.cosmology),
    ]
    predicted = build_response([mass, bins, local], setting).predict(truth.theta)
    assert_allclose(predicted, expected, rtol=RTOL)


# A free Doppler argument


@pytest.mark.parametrize(
    "doppler",
    [
        {"dist": "fixed", "b": {"dist": "norm", "loc": 26.0, "scale": 4.0}},
        {"dist": "hui_rutledge", "b_sigma": {"dist": "uniform", "loc": 15.0, "scale": 20.0}},
        {"dist": "norm", "loc": 26.0, "scale": {"dist": "halfnorm", "scale": 8.0}},
    ],
)
def test_interpolated_widths_of_a_free_doppler_argument(doppler):
    grid = doppler_grid(doppler)
    log_nhi = np.linspace(12.0, 22.0, 41)
    on_grid = np.array([mean_equivalent_width(log_nhi, settings) for settings in grid.settings])
    lo, hi = grid.values[[0, -1]]
    for value in np.geomspace(lo, hi, 9):
        exact = mean_equivalent_width(log_nhi, {**doppler, grid.argument: value})
        assert_allclose(grid.mix(np.array([value]))[0] @ on_grid, exact, rtol=RTOL)


@FEWER
@given(truths(), st.floats(16.0, 36.0))
def test_lya_opacity_at_a_free_doppler_parameter(truth, b):
    data = rows(
        "lya_opacity", [(2.5, 2.5), (3.0, 3.6)], form="tau", log_nhi_min=12.2, log_nhi_max=17.2
    )
    free = {"dist": "fixed", "b": {"dist": "norm", "loc": 26.0, "scale": 4.0}}
    plain = setting_of(truth)
    response = build_response([data], Setting(plain.distribution, plain.cosmology, free))
    expected = build_response(
        [data], Setting(plain.distribution, plain.cosmology, {"dist": "fixed", "b": b})
    )
    predicted = response.predict(np.array([*truth.theta, b]))
    assert_allclose(predicted, expected.predict(truth.theta), rtol=RTOL)
    assert predicted[0] != pytest.approx(
        response.predict(np.array([*truth.theta, 1.2 * b]))[0], rel=1e-3
    )
