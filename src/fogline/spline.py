"""Monotone cubic Hermite interpolation of many curves over the same pivots at once.

Between neighbouring pivots each curve is the cubic with given values and slopes at both. Slopes
inside are the weighted harmonic means of the neighbouring secants, zero where these change sign
or vanish, so that a curve never overshoots its values; slopes at both ends are the three-point
ones, limited so that the end interval stays monotone.

All that depends on the pivots alone is prepared once. The spline at fixed points is then *linear*
in values and slopes, one matrix product with `HermiteSpline.basis` for any number of curves.

Agrees with `scipy.interpolate.PchipInterpolator` to 1e-12, for monotone and other curves
(``tests/properties/test_spline_shape.py``).

References
----------
Fritsch & Carlson 1980, SIAM J. Numer. Anal. 17, 238 (monotone cubics);
Fritsch & Butland 1984, SIAM J. Sci. Stat. Comput. 5, 300 (harmonic-mean slopes).
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class HermiteSpline:
    """Monotone cubic interpolation through values at fixed pivots.

    Parameters
    ----------
    pivots : array_like, shape (n_pivots,)
        At least two, finite, strictly increasing.

    Raises
    ------
    ValueError
        Where `pivots` are not so.
    """

    pivots: Array
    _inverse_width: Array = field(init=False, repr=False)
    _mean_weights: tuple[Array, Array] = field(init=False, repr=False)
    _end_weights: tuple[tuple[float, float], tuple[float, float]] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        pivots = _checked_pivots(self.pivots)
        width = np.diff(pivots)
        near, far = width[:-1], width[1:]
        # The wider an interval, the more the secant on its far side counts: that keeps the slope
        # within the monotone region however unequal the widths are.
        self._set("pivots", pivots)
        self._set("_inverse_width", 1.0 / width)
        self._set(
            "_mean_weights",
            tuple(w / (3.0 * (near + far)) for w in (2.0 * far + near, far + 2.0 * near)),
        )
        if width.size > 1:
            ends = (_end_weights(width[0], width[1]), _end_weights(width[-1], width[-2]))
            self._set("_end_weights", ends)

    def _set(self, name: str, value: object) -> None:
        object.__setattr__(self, name, value)

    def slopes(self, values: Array) -> Array:
        """Return the slope of every curve at every pivot.

        Parameters
        ----------
        values : ndarray, shape (..., n_pivots)
            Finite; secants above 1e150 overflow.

        Returns
        -------
        ndarray, shape (..., n_pivots)

        References
        ----------
        Fritsch & Butland 1984 (inside); ends as in `scipy.interpolate.PchipInterpolator`.
        """
        secants = (values[..., 1:] - values[..., :-1]) * self._inverse_width
        slopes = np.zeros(values.shape)
        if secants.shape[-1] == 1:
            slopes += secants
            return slopes
        left, right = secants[..., :-1], secants[..., 1:]
        weight_left, weight_right = self._mean_weights
        product = left * right
        # The harmonic mean as product over sum: a vanishing secant never divides, and where
        # the sign changes the zero that is there stays.
        mean = weight_left * right + weight_right * left
        np.divide(product, mean, out=slopes[..., 1:-1], where=product > 0.0)
        first, last = self._end_weights
        slopes[..., 0] = _end_slope(secants[..., 0], secants[..., 1], first)
        slopes[..., -1] = _end_slope(secants[..., -1], secants[..., -2], last)
        return slopes

    def basis(self, points: ArrayLike) -> Array:
        """Return the matrix that turns values and slopes into the spline at `points`.

        Parameters
        ----------
        points : array_like, shape (n_points,)
            Within the pivots.

        Returns
        -------
        ndarray, shape (2 * n_pivots, n_points)
            ``concatenate([values, slopes], -1) @ basis`` is the spline at `points`.

        Raises
        ------
        ValueError
            Where a point lies outside the pivots; names both ranges.
        """
        points = self._checked_points(points)
        n_pivots, column = self.pivots.size, np.arange(points.size)
        left = np.clip(np.searchsorted(self.pivots, points, "right") - 1, 0, n_pivots - 2)
        width = self.pivots[left + 1] - self.pivots[left]
        t = (points - self.pivots[left]) / width
        s = 1.0 - t
        basis = np.zeros((2 * n_pivots, points.size))
        basis[left, column] = (1.0 + 2.0 * t) * s**2
        basis[left + 1, column] = (1.0 + 2.0 * s) * t**2
        basis[n_pivots + left, column] = width * t * s**2
        basis[n_pivots + left + 1, column] = -width * s * t**2
        return basis

    def __call__(self, values: Array, points: ArrayLike) -> Array:
        """Return every curve at every point.

        Parameters
        ----------
        values : ndarray, shape (..., n_pivots)
        points : array_like, shape (n_points,)
            Within the pivots.

        Returns
        -------
        ndarray, shape (..., n_points)

        Raises
        ------
        ValueError
            Where a point lies outside the pivots; names both ranges.
        """
        values = np.asarray(values, dtype=float)
        return np.concatenate([values, self.slopes(values)], axis=-1) @ self.basis(points)

    def _checked_points(self, points: ArrayLike) -> Array:
        points = np.atleast_1d(np.asarray(points, dtype=float))
        low, high = self.pivots[0], self.pivots[-1]
        if not np.all((points >= low) & (points <= high)):  # NaN fails here too
            raise ValueError(
                f"points span {points.min():g} to {points.max():g}, "
                f"outside the pivots, which span {low:g} to {high:g}"
            )
        return points


def hermite_slopes(x: ArrayLike, y: ArrayLike) -> Array:
    """Return monotone slopes of many curves; `HermiteSpline` prepares `x` once for repeated use.

    Parameters
    ----------
    x : array_like, shape (n_pivots,)
        Strictly increasing.
    y : array_like, shape (..., n_pivots)

    Returns
    -------
    ndarray, shape (..., n_pivots)
    """
    return HermiteSpline(np.asarray(x, dtype=float)).slopes(np.asarray(y, dtype=float))


def _checked_pivots(pivots: ArrayLike) -> Array:
    pivots = np.array(pivots, dtype=float)
    if pivots.ndim != 1 or pivots.size < 2:
        raise ValueError(f"pivots must be at least two numbers in a row, got {pivots.tolist()}")
    if not np.all(np.isfinite(pivots)):
        raise ValueError(f"pivots must be finite, got {pivots.tolist()}")
    falls = np.flatnonzero(np.diff(pivots) <= 0.0)
    if falls.size:
        raise ValueError(f"pivots must increase strictly; fails after index {falls[0]}")
    pivots.flags.writeable = False
    return pivots


def _end_weights(width: float, next_width: float) -> tuple[float, float]:
    # Derivative at the end of the parabola through the three outermost pivots.
    both = width + next_width
    return float((width + both) / both), float(width / both)


def _end_slope(secant: Array, next_secant: Array, weights: tuple[float, float]) -> Array:
    # Between 0 and three times the end's secant the end interval is monotone (Fritsch & Carlson
    # 1980). The upper limit acts only where the secants differ in sign: else slope <= 2 secant.
    slope = weights[0] * secant - weights[1] * next_secant
    limit = 3.0 * secant
    return np.asarray(np.clip(slope, np.minimum(limit, 0.0), np.maximum(limit, 0.0)))
