"""Monotone splines: closed forms, shapes, linearity in values and slopes, refusals."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.interpolate import PchipInterpolator

from fogline.spline import HermiteSpline, hermite_slopes

PIVOTS = np.array([12.0, 13.5, 15.0, 16.2, 17.5, 19.0, 20.3, 21.0, 21.6, 22.5])


def test_straight_line_is_reproduced():
    points = np.linspace(12.0, 22.5, 106)
    values = np.array([[-1.0], [2.5]]) * PIVOTS + 3.0
    expected = np.array([[-1.0], [2.5]]) * points + 3.0
    assert_allclose(HermiteSpline(PIVOTS)(values, points), expected, rtol=1e-13)


def test_harmonic_mean_of_equal_intervals():
    # Equal widths, secants 1 and 3: the harmonic mean 2 / (1/1 + 1/3) = 1.5.
    assert hermite_slopes([0.0, 1.0, 2.0], [0.0, 1.0, 4.0])[1] == pytest.approx(1.5, rel=1e-15)


def test_end_slopes_are_limited():
    # Secants 1 and 5: the parabola's slope 1.5 - 2.5 has the wrong sign, so zero.
    assert hermite_slopes([0.0, 1.0, 2.0], [0.0, 1.0, 6.0])[0] == 0.0
    # Secants 1 and -9: 1.5 + 4.5 = 6 is more than three times the end's secant.
    assert hermite_slopes([0.0, 1.0, 2.0], [0.0, 1.0, -8.0])[0] == pytest.approx(3.0)
    # Secants 1 and -1: 1.5 + 0.5 stays.
    assert hermite_slopes([0.0, 1.0, 2.0], [0.0, 1.0, 0.0])[0] == pytest.approx(2.0)


def test_flat_pieces_and_turns_have_no_slope():
    values = np.array([5.0, 4.0, 4.0, 3.0, 3.5, 1.0, 0.0, 0.0, 0.0, 0.0])
    slopes = hermite_slopes(PIVOTS, values)
    assert np.flatnonzero(slopes == 0.0).tolist() == [1, 2, 3, 4, 6, 7, 8, 9]


def test_basis_is_linear_in_values_and_slopes():
    rng = np.random.default_rng(3)
    spline, points = HermiteSpline(PIVOTS), rng.uniform(12.0, 22.5, 40)
    values = rng.normal(size=(4, 7, 10))
    both = np.concatenate([values, spline.slopes(values)], axis=-1)
    assert spline.basis(points).shape == (20, 40)
    assert_allclose(both @ spline.basis(points), spline(values, points), rtol=1e-13, atol=1e-13)
    assert spline(values, points).shape == (4, 7, 40)


def test_pivots_and_both_ends_are_hit():
    values = np.random.default_rng(4).normal(size=10)
    assert_allclose(HermiteSpline(PIVOTS)(values, PIVOTS), values, rtol=1e-14)


@pytest.mark.parametrize("n_pivots", [2, 3])
def test_shortest_splines_agree_with_scipy(n_pivots):
    pivots = PIVOTS[:n_pivots]
    points = np.linspace(pivots[0], pivots[-1], 31)
    values = np.random.default_rng(n_pivots).normal(size=(50, n_pivots))
    expected = PchipInterpolator(pivots, values, axis=-1)(points)
    assert_allclose(HermiteSpline(pivots)(values, points), expected, rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("points", [[11.9, 15.0], [15.0, 22.6], [np.nan]])
def test_points_beyond_the_pivots_are_refused(points):
    with pytest.raises(ValueError, match=r"points span .* outside the pivots, .* 12 to 22\.5"):
        HermiteSpline(PIVOTS).basis(points)


@pytest.mark.parametrize(
    ("pivots", "message"),
    [
        ([12.0], "at least two"),
        ([[12.0, 13.0]], "at least two"),
        ([12.0, np.inf], "finite"),
        ([12.0, 13.0, 13.0, 14.0], "strictly; fails after index 1"),
    ],
)
def test_unusable_pivots_are_refused(pivots, message):
    with pytest.raises(ValueError, match=message):
        HermiteSpline(pivots)


def test_pivots_cannot_change_under_the_spline():
    mine = PIVOTS.copy()
    spline = HermiteSpline(mine)
    mine[0] = 0.0
    assert spline.pivots[0] == 12.0
    with pytest.raises(ValueError, match="read-only"):
        spline.pivots[0] = 0.0
