"""Lists of absorbers against the direct sum over single absorbers, by adaptive quadrature."""

import dataclasses
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy import stats
from scipy.integrate import quad
from test_accuracy import FEWER, RTOL, setting_of, truths

from fogline.absorber_files import Listed, _rows_of
from fogline.absorbers.errors import below, density, representative, selected
from fogline.absorbers.path import PATH_NODES, coverage, from_sensitivity, from_sightlines
from fogline.absorbers.reduction import reduce_list
from fogline.datasets import EXPOSURE, INTENSITY, SHOWN, hypothetical
from fogline.likelihood import Likelihood
from fogline.response import build_response
from reference_integrals import LN10, dx_dz

LEAST = 20.3
COMPLETE = (np.array([19.0, 20.5, 21.5]), np.array([0.5, 0.9, 1.0]))


def absorber_list(listed, path, **meta):
    """Return a data set as the reader makes it."""
    z_path, weight = path
    meta = {"log_nhi_min": LEAST, **meta}
    span = float(z_path.min()), float(z_path.max())
    lo, hi = representative(listed.lo, listed.hi)
    extras = {"path_z": z_path, "path_weight": weight, "errors_lo": lo, "errors_hi": hi}
    extras["n_absorbers"] = np.array(float(len(listed.z)))
    extras |= {"completeness_log_nhi": COMPLETE[0], "completeness": COMPLETE[1]}
    data = hypothetical("absorber_list", [3.0], **meta)
    return dataclasses.replace(data, extras=extras, **_rows_of(listed, meta, span))


def some_list(rng, n=40, errors=(0.1,), asymmetric=False, bound=0):
    lo = rng.choice(errors, n) if len(errors) < 3 else rng.uniform(errors[0], errors[-1], n)
    hi = 1.5 * lo if asymmetric else lo
    is_bound = np.arange(n) < bound
    log_nhi = LEAST + rng.exponential(0.35, n).clip(0.0, 1.9)
    return Listed(rng.uniform(2.2, 3.4, n), log_nhi, lo, hi, is_bound)


def ln_intensity(truth, x, z, lo, hi, bound):
    """ln of the intensity of one absorber, with scipy's quadrature and normal distribution."""

    def kernel(log_nhi):
        if bound:
            return stats.norm.cdf((log_nhi - x) / lo)
        sigma = hi if log_nhi > x else lo
        return 2.0 * sigma / (lo + hi) * stats.norm.pdf(log_nhi, x, sigma)

    def integrand(log_nhi):
        complete = np.interp(log_nhi, *COMPLETE)
        return truth.f(log_nhi, z) * complete * kernel(log_nhi) * LN10 * 10.0**log_nhi

    ends = max(truth.pivots[0], x - 8.0 * lo), truth.pivots[-1] if bound else x + 8.0 * hi
    ends = ends[0], min(ends[1], truth.pivots[-1])
    kinks = [k for k in (*truth.pivots, *truth.evolution_pivots, *COMPLETE[0], x) if
             ends[0] < k < ends[1]]  # fmt: skip
    edges = [ends[0], *sorted(kinks), ends[1]]
    total = sum(
        quad(integrand, a, b, epsabs=0, epsrel=1e-8, limit=200)[0] for a, b in pairwise(edges)
    )
    return np.log(dx_dz(truth.cosmology, z) * total)


LISTS = [
    {"errors": (0.1,)},
    {"errors": (0.08, 0.2)},
    {"errors": (0.08, 0.1, 0.2)},
    {"errors": (0.1,), "asymmetric": True},
    {"errors": (0.1,), "bound": 12},
]


@pytest.mark.parametrize("kind", LISTS)
@settings(FEWER, max_examples=3)
@given(truths(), st.integers(0, 100))
def test_sum_over_cells_is_the_sum_over_absorbers(kind, truth, seed):
    listed = some_list(np.random.default_rng(seed), **kind)
    data = absorber_list(listed, from_sightlines(np.array([2.2]), np.array([3.4])))
    predicted = build_response([data], setting_of(truth)).predict(truth.theta)
    cells = data.role == INTENSITY
    found = data.observed[cells] @ np.log(predicted[cells])
    rows = zip(listed.log_nhi, listed.z, listed.lo, listed.hi, listed.bound, strict=True)
    expected = sum(ln_intensity(truth, *row) for row in rows)
    # Splines here jump in slope by up to 5 within an error; even so ln L of 40 absorbers is good
    # to 0.02, where a difference of 0.5 is one sigma.
    assert found == pytest.approx(expected, abs=0.02 + 1e-4 * abs(expected))


@settings(FEWER, max_examples=3)
@given(truths())
def test_expected_number_and_bins(truth):
    rng = np.random.default_rng(3)
    z_start = rng.uniform(2.0, 3.0, 50)
    z_end = z_start + rng.uniform(0.1, 1.0, 50)
    listed = some_list(rng, errors=(0.1,))
    data = absorber_list(listed, from_sightlines(z_start, z_end))
    predicted = build_response([data], setting_of(truth)).predict(truth.theta)

    def measured_in(lo, hi, z):
        def kernel(log_nhi):
            chance = stats.norm.cdf(hi, log_nhi, 0.1) - stats.norm.cdf(lo, log_nhi, 0.1)
            return chance * np.interp(log_nhi, *COMPLETE)

        edges = sorted({12.0, lo - 0.7, lo, lo + 0.7, *COMPLETE[0], *truth.pivots, 17.5, 20.3})
        total = sum(
            truth.dense.integral(a, b, z, kernel) for a, b in pairwise(edges) if b > lo - 0.75
        )
        return total * dx_dz(truth.cosmology, z)

    at, weights = np.polynomial.legendre.leggauss(10)

    def expected(lo, hi):
        # Over all sightlines: ten nodes on each of their overlapping pieces.
        z, g = coverage(z_start, z_end)
        grid = np.linspace(z[0], z[-1], 15)
        smooth = np.polynomial.chebyshev.Chebyshev.fit(
            grid, [measured_in(lo, hi, x) for x in grid], 9
        )
        pieces = zip(z[:-1], z[1:], g[:-1], strict=True)
        return sum(
            n * 0.5 * (b - a) * (weights @ smooth(a + 0.5 * (b - a) * (1.0 + at)))
            for a, b, n in pieces
        )

    exposure = np.flatnonzero(data.role == EXPOSURE)[0]
    assert predicted[exposure] == pytest.approx(expected(LEAST, np.inf), rel=RTOL)
    shown = np.flatnonzero(data.role == SHOWN)[:2]
    for row in shown:
        bin_ = data.log_nhi_lo[row], data.log_nhi_hi[row]
        assert predicted[row] == pytest.approx(expected(*bin_), rel=RTOL)


# Closed forms


def test_density_and_chance_are_those_of_one_split_normal():
    y = np.linspace(19.0, 23.0, 4001)
    p = density(y, np.array(21.0), np.array(0.1), np.array(0.3))
    assert np.trapezoid(p, y) == pytest.approx(1.0, rel=1e-5)
    chance = below(y, np.array(21.0), np.array(0.1), np.array(0.3))
    running = np.concatenate([[0.0], np.cumsum(0.5 * (p[1:] + p[:-1]) * np.diff(y))])
    assert_allclose(chance, running, atol=2e-4)
    # A measurement below the truth has its upper error.
    assert chance[y.searchsorted(21.0)] == pytest.approx(0.75, abs=1e-3)


def test_selection_of_a_power_law_scatters_inwards():
    x = np.linspace(19.0, 23.0, 2001)
    chance = selected(x, 20.3, np.inf, np.array([0.15]), np.array([0.15]))
    assert chance[0] < 1e-10
    assert chance[-1] == pytest.approx(1.0)
    f = 10.0 ** (-1.0 * x)  # per dex, falling
    assert np.trapezoid(f * chance, x) > 1.05 * np.trapezoid(f * (x > 20.3), x)


def test_path_of_sightlines_is_exact_for_polynomials():
    rng = np.random.default_rng(5)
    start = rng.uniform(2.0, 3.5, 200)
    end = start + rng.uniform(0.05, 1.2, 200)
    z, w = from_sightlines(start, end)
    for k in range(2 * PATH_NODES):
        exact = ((end ** (k + 1) - start ** (k + 1)) / (k + 1)).sum()
        assert w @ z**k == pytest.approx(exact, rel=1e-10)
    assert w.sum() == pytest.approx((end - start).sum(), rel=1e-12)


def test_tabulated_sensitivity_is_the_same_path():
    z = np.array([2.0, 2.5, 3.0, 3.6])
    g = np.array([0.0, 100.0, 80.0, 0.0])
    at, w = from_sensitivity(z, g)
    for k in range(2 * PATH_NODES):
        exact = quad(lambda x, k=k: np.interp(x, z, g) * x**k, 2.0, 3.6, points=[2.5, 3.0])[0]
        assert w @ at**k == pytest.approx(exact, rel=1e-9)


def test_two_short_sightlines_far_apart_need_no_more_nodes():
    start = np.array([2.0, 4.0])
    z, w = from_sightlines(start, start + 1e-7)
    assert (z >= 2.0 - 1e-9).all()
    assert (z <= 4.0 + 1e-6).all()
    assert w @ (1.0 + z) ** 6 == pytest.approx(1e-7 * (3.0**6 + 5.0**6), rel=1e-6)


def test_steep_evolution_over_the_longest_path():
    z, w = from_sightlines(np.array([1.8]), np.array([5.2]))
    exact = (6.2**7 - 2.8**7) / 7.0
    assert w @ (1.0 + z) ** 6 == pytest.approx(exact, rel=1e-5)


def test_coverage_counts_sightlines():
    z, g = coverage(np.array([2.0, 2.2, 2.2]), np.array([3.0, 2.5, 3.0]))
    assert z.tolist() == [2.0, 2.2, 2.5, 3.0]
    assert g.tolist() == [1.0, 3.0, 2.0, 0.0]


def test_cells_do_not_grow_with_the_list():
    rng = np.random.default_rng(6)
    sizes = []
    for n in (1_000, 100_000):
        listed = some_list(rng, n=n)
        cells = reduce_list(listed.log_nhi, listed.z, listed.lo, listed.hi)
        assert cells.number.sum() == pytest.approx(n, rel=1e-12)
        sizes.append(len(cells.z))
    assert sizes[1] < 1.2 * sizes[0]


def test_likelihood_is_that_of_a_poisson_process():
    rng = np.random.default_rng(7)
    data = absorber_list(some_list(rng), from_sightlines(np.array([2.2]), np.array([3.4])))
    likelihood = Likelihood.from_datasets([data])
    predicted = rng.uniform(0.5, 2.0, (2, data.n_rows))
    cells, exposure = data.role == INTENSITY, data.role == EXPOSURE
    expected = np.log(predicted[:, cells]) @ data.observed[cells] - predicted[:, exposure][:, 0]
    assert_allclose(likelihood.ln_total(predicted), expected, rtol=1e-12)
    # What is only shown has no say.
    changed = predicted.copy()
    changed[:, data.role == SHOWN] *= 2.0
    assert_allclose(likelihood.ln_total(changed), expected, rtol=1e-12)
    # A factor on the path: n ln s less what s adds to the expected number.
    scaled = dataclasses.replace(data, meta={**data.meta, "scale": {"dist": "norm", "loc": 1.0}})
    with_scale = Likelihood.from_datasets([scaled]).ln_total(predicted, np.full((2, 1), 1.3))
    shift = 40.0 * np.log(1.3) - 0.3 * predicted[:, exposure][:, 0]
    assert_allclose(with_scale, expected + shift, rtol=1e-10)


def test_f_that_ends_below_an_absorber_is_refused_without_nan():
    data = absorber_list(
        some_list(np.random.default_rng(8)), from_sightlines(np.array([2.2]), np.array([3.4]))
    )
    predicted = np.ones((1, data.n_rows))
    predicted[:, data.role == INTENSITY] = np.where(
        data.log_nhi_lo[data.role == INTENSITY] > 21.0, 0.0, 1.0
    )
    ln_p = Likelihood.from_datasets([data]).ln_total(predicted)[0]
    assert np.isfinite(ln_p)
    assert ln_p < -1000.0
