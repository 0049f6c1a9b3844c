"""Monotone splines agree with scipy's to 1e-12, whatever the curve; and they are monotone."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from scipy.interpolate import PchipInterpolator

from fogline.spline import HermiteSpline


@st.composite
def curves(draw):
    """Uneven pivots and three curves with steps, turns and flat pieces."""
    n_pivots = draw(st.integers(2, 12))
    widths = draw(st.lists(st.floats(0.05, 5.0), min_size=n_pivots - 1, max_size=n_pivots - 1))
    # Small integers give flat pieces and equal secants, floats everything else.
    value = st.one_of(st.integers(-3, 3).map(float), st.floats(-40.0, 40.0))
    row = st.lists(value, min_size=n_pivots, max_size=n_pivots)
    values = draw(st.lists(row, min_size=3, max_size=3))
    return np.concatenate([[12.0], 12.0 + np.cumsum(widths)]), np.array(values)


def points_within(pivots):
    inside = np.linspace(pivots[0], pivots[-1], 97)
    return np.union1d(np.minimum(inside, pivots[-1]), pivots)


@given(curves())
def test_agrees_with_scipy(curve):
    pivots, values = curve
    points = points_within(pivots)
    # scipy's harmonic mean overflows for secants near 1e-308; its answer there is still zero.
    with np.errstate(over="ignore"):
        reference = PchipInterpolator(pivots, values, axis=-1)
    spline = HermiteSpline(pivots)
    # Rounding grows with the largest secant, 80 / 0.05 at most.
    scale = max(1.0, np.abs(np.diff(values) / np.diff(pivots)).max())
    assert_allclose(spline(values, points), reference(points), rtol=1e-12, atol=1e-12 * scale)
    assert_allclose(
        spline.slopes(values), reference.derivative()(pivots), rtol=1e-12, atol=1e-12 * scale
    )


@given(curves())
def test_never_leaves_the_values_of_its_interval(curve):
    pivots, values = curve
    points = points_within(pivots)
    left = np.clip(np.searchsorted(pivots, points, "right") - 1, 0, pivots.size - 2)
    ends = np.stack([values[:, left], values[:, left + 1]])
    spline = HermiteSpline(pivots)(values, points)
    slack = 1e-12 * np.abs(values).max()
    assert np.all(spline >= ends.min(axis=0) - slack)
    assert np.all(spline <= ends.max(axis=0) + slack)
