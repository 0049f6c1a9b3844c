"""Where the optical depth reaches one, for depths that are known in closed form."""

import numpy as np
import pytest
from numpy.polynomial import chebyshev
from numpy.testing import assert_allclose

from fogline.cosmology import Cosmology
from fogline.unit_depth import (
    COEFFICIENTS,
    chebyshev_points,
    interpolation_matrix,
    length_table,
    path_length,
    redshift_grid,
    solve_unit_depth,
)

Z_EM = np.array([2.4, 5.0])
S_MAX = np.log1p(Z_EM)


def coefficients(q):
    """Chebyshev coefficients of q(s) for both sources."""
    rows = []
    for s_max in S_MAX:
        s = chebyshev_points(0.0, s_max, COEFFICIENTS)
        rows.append(chebyshev.chebfit(2.0 * s / s_max - 1.0, q(s), COEFFICIENTS - 1))
    return np.array(rows)


@pytest.mark.parametrize("s", [1e-4, 0.003, 0.05, 0.3, 0.7, 1.2])
def test_constant_opacity(s):
    assert_allclose(
        solve_unit_depth(coefficients(lambda x: 0.0 * x + 1.0 / s), Z_EM), s, rtol=1e-10
    )


@pytest.mark.parametrize("k", [0.9, 5.0, 80.0])
def test_opacity_that_falls_along_the_path(k):
    # τ = k (1 - e^-s): s = -ln(1 - 1/k), where that exists on the path.
    def q(s):
        return -k * np.expm1(-s) / s

    expected = -np.log(1.0 - 1.0 / k) if k > 1.0 else np.inf
    solved = solve_unit_depth(coefficients(q), Z_EM)
    assert_allclose(solved, np.where(expected < S_MAX, expected, np.inf), rtol=2e-6)


def test_the_first_crossing_counts():
    # τ = 1.5 sin(2 s) reaches one at s = 0.365, and again on its way down at 1.206.
    solved = solve_unit_depth(coefficients(lambda s: 1.5 * np.sin(2.0 * s) / s), Z_EM)
    assert_allclose(solved, 0.5 * np.arcsin(1.0 / 1.5), rtol=1e-5)


def test_just_beyond_and_just_within_reach():
    for s_max, row in zip(S_MAX, range(2), strict=True):
        within = solve_unit_depth(coefficients(lambda x: 0.0 * x + 1.0001 / s_max), Z_EM)[row]  # noqa: B023
        assert within == pytest.approx(s_max / 1.0001, rel=1e-9)
        beyond = solve_unit_depth(coefficients(lambda x: 0.0 * x + 0.9999 / s_max), Z_EM)[row]  # noqa: B023
        assert np.isinf(beyond)


def test_many_walkers_at_once():
    stacked = np.stack([coefficients(lambda x: 0.0 * x + k) for k in (2.0, 9.0, 0.1)])  # noqa: B023
    solved = solve_unit_depth(stacked, Z_EM)
    assert solved.shape == (3, 2)
    assert_allclose(solved[:2], [[0.5, 0.5], [1 / 9, 1 / 9]], rtol=1e-9)
    assert np.isinf(solved[2]).all()


@pytest.mark.parametrize("comoving", [False, True])
def test_lengths_from_the_table(comoving):
    cosmology = Cosmology(72.0, 0.26)
    tables = np.stack([length_table(z, cosmology, comoving) for z in Z_EM])
    length = cosmology.comoving_length if comoving else cosmology.proper_length
    for s in (1e-3, 0.02, 0.4, 1.1):
        expected = length((1.0 + Z_EM) * np.exp(-s) - 1.0, Z_EM)
        assert_allclose(path_length(np.full(2, s), Z_EM, tables), expected, rtol=1e-6)
    assert np.isinf(path_length(np.full(2, np.inf), Z_EM, tables)).all()


def test_interpolation_is_exact_for_polynomials():
    nodes = chebyshev_points(1.0, 3.0, 6)
    points = np.linspace(1.0, 3.0, 11)
    matrix = interpolation_matrix(nodes, points)
    for power in range(6):
        assert_allclose(matrix @ nodes**power, points**power, rtol=1e-12)
    assert not np.allclose(matrix @ nodes**6, points**6, rtol=1e-6)


def test_grid_spans_from_today_to_the_source():
    grid = redshift_grid(4.4)
    assert grid.min() == pytest.approx(0.0, abs=1e-12)
    assert grid.max() == pytest.approx(4.4, rel=1e-12)
