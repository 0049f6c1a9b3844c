"""How the rows of a data set are put on an axis.

Data are shown as measured. The only changes are those of a number's form, applied to value and
errors' ends alike: a unit factor, -ln of a mean flux, a logarithm, a count over its searched path.
Where a file's convention is not that of the curve, the prediction in the file's own convention is
drawn beside each point (`draw_predictions`).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.path import Path
from matplotlib.transforms import Transform, offset_copy
from numpy.typing import NDArray
from scipy.stats import chi2

from fogline.datasets import DataSet
from fogline.figures.style import DataStyle

Array = NDArray[np.float64]
ToDisplay = Callable[[Array], Array]

ONE_SIGMA_TAIL: Final = 0.15865525393145707
"""Probability beyond one standard deviation on one side."""

ARROW_SIZE: Final = 20.0
"""Marker size that makes a limit's arrow half as long [pt]."""

BESIDE: Final = 4.0
"""Distance of a prediction from its datum [pt]."""

_ARROW: Final = np.array([(0.0, 0.0), (0.0, 1.0), (-0.22, 0.68), (0.0, 1.0), (0.22, 0.68)])
_CODES: Final = [Path.MOVETO, Path.LINETO, Path.MOVETO, Path.LINETO, Path.LINETO]
ARROWS: Final = {sign: Path(-sign * _ARROW, _CODES) for sign in (1, -1)}
"""Markers of upper (down) and lower (up) limits, their tails at the limit."""


@dataclass(frozen=True)
class Points:
    """Rows of a data set in the coordinates of an axis.

    Parameters
    ----------
    x, x_lo, x_hi : ndarray, shape (n_rows,)
        Position and ends of the bin.
    y, y_lo, y_hi : ndarray, shape (n_rows,)
        Value and ends of its 68% error; a limit's own value where `limit` is not 0.
    limit : ndarray of int, shape (n_rows,)
        +1 upper, -1 lower, 0 none, on this axis.
    """

    x: Array
    x_lo: Array
    x_hi: Array
    y: Array
    y_lo: Array
    y_hi: Array
    limit: NDArray[np.int64]


def poisson_interval(count: Array) -> tuple[Array, Array]:
    """Return the central 68.3% interval of a Poisson mean, given a count.

    Parameters
    ----------
    count : ndarray

    Returns
    -------
    lo, hi : ndarray
        Garwood (1936, Biometrika 28, 437); lo is 0 for a count of 0.
    """
    tail = ONE_SIGMA_TAIL
    # chi2 with 0 degrees of freedom is undefined; the interval of no count starts at 0.
    lo = np.where(count > 0, 0.5 * chi2.ppf(tail, 2.0 * np.maximum(count, 1.0)), 0.0)
    return lo, np.asarray(0.5 * chi2.isf(tail, 2.0 * count + 2.0))


def file_intervals(data: DataSet) -> tuple[Array, NDArray[np.int64]]:
    """Return lower end, value, upper end of every row in the file's numbers, and the limits.

    Returns
    -------
    ndarray, shape (3, n_rows)
        Counts as counts; a count of 0 is the upper limit at the file's confidence.
    ndarray of int, shape (n_rows,)
        +1 upper, -1 lower, 0 none.
    """
    if not data.counts:
        lo, hi = data.observed - data.err_lo, data.observed + data.err_hi
        return np.array([lo, data.observed, hi]), data.limit
    lo, hi = poisson_interval(data.observed)
    none = data.observed == 0
    value = np.where(none, -np.log1p(-data.confidence), data.observed)
    return np.array([lo, value, hi]), none.astype(np.int64)


def per_path(data: DataSet) -> ToDisplay:
    """Return the map from a file's numbers to numbers per unit path: identity but for counts."""
    return (lambda v: v / data.search_path) if data.counts else (lambda v: v)


def along_z(data: DataSet, to_display: ToDisplay) -> Points:
    """Return the rows of a data set against redshift.

    Parameters
    ----------
    data : DataSet
    to_display : callable
        Maps the file's numbers, shape (..., n_rows), to those of the axis; monotonic.
    """
    return _points(data, to_display, data.z_lo, data.z, data.z_hi)


def along_columns(data: DataSet, to_display: ToDisplay) -> Points:
    """Return the rows of a data set against log N; parameters as in `along_z`."""
    middle = 0.5 * (data.log_nhi_lo + data.log_nhi_hi)
    return _points(data, to_display, data.log_nhi_lo, middle, data.log_nhi_hi)


def _points(data: DataSet, to_display: ToDisplay, x_lo: Array, x: Array, x_hi: Array) -> Points:
    ends, limit = file_intervals(data)
    with np.errstate(divide="ignore", invalid="ignore"):
        lo, y, hi = to_display(ends)
        falls = to_display(ends[1] * 1.001) < y
    # -ln F turns an upper limit of the flux into a lower one of the optical depth.
    limit = np.where(falls, -limit, limit)
    return Points(x, x_lo, x_hi, y, np.minimum(lo, hi), np.maximum(lo, hi), limit)


def draw_points(
    axes: Axes, points: Points, style: DataStyle, *, filled: bool = True, label: str = ""
) -> None:
    """Draw data: symbols with errors, bins as horizontal bars, limits as arrows.

    Parameters
    ----------
    axes : Axes
    points : Points
    style : DataStyle
    filled : bool
        Whether symbols are filled; a figure may use it to tell definitions apart.
    label : str
        Other than the style's own.
    """
    container = axes.errorbar(
        points.x,
        points.y,
        xerr=[points.x - points.x_lo, points.x_hi - points.x],
        yerr=[_bar(points, points.y - points.y_lo), _bar(points, points.y_hi - points.y)],
        fmt=style.marker,
        color=style.colour,
        markerfacecolor=style.colour if filled else "white",
        markeredgewidth=0.8,
        markersize=4.0,
        elinewidth=0.8,
        zorder=4,
        label=label or style.label,
    )
    container.lines[0].set_gid(f"data:{style.label}")
    for sign, arrow in ARROWS.items():
        _draw_arrows(axes, points, points.limit == sign, arrow, style.colour)


def _bar(points: Points, length: Array) -> Array:
    """Return the lengths of error bars: none for limits, off the axis where there is no end."""
    reach = 10.0 * np.abs(points.y) + 1.0
    bounded = np.where(np.isfinite(length), np.minimum(length, reach), reach)
    return np.where(points.limit == 0, bounded, 0.0)


def _draw_arrows(
    axes: Axes, points: Points, rows: NDArray[np.bool_], arrow: Path, colour: str
) -> None:
    if rows.any():
        axes.plot(
            points.x[rows],
            points.y[rows],
            linestyle="none",
            marker=arrow,
            markersize=ARROW_SIZE,
            markeredgewidth=0.8,
            color=colour,
            fillstyle="none",
            zorder=3.9,
            label="_limit",
        )


def draw_predictions(
    axes: Axes, x: Array, predicted: Array, style: DataStyle, *, label: str = "_prediction"
) -> None:
    """Draw the predictions of a data set's rows, in its own convention, beside the data.

    Parameters
    ----------
    axes : Axes
    x : ndarray, shape (n_rows,)
        Where the data are; predictions stand a few points to the right.
    predicted : ndarray, shape (3, n_rows)
        Ends and middle of the 68% band, in the numbers of the axis, in any order of the ends.
    style : DataStyle
    label : str
        For legends; none by default.
    """
    lo, middle, hi = np.sort(predicted, axis=0)
    finite = np.isfinite(predicted).all(axis=0)
    container = axes.errorbar(
        x[finite],
        middle[finite],
        yerr=[(middle - lo)[finite], (hi - middle)[finite]],
        fmt="o",
        color=style.colour,
        markersize=2.6,
        markerfacecolor="white",
        markeredgewidth=0.7,
        elinewidth=2.0,
        transform=_beside(axes),
        zorder=3.5,
        label=label,
    )
    container.lines[0].set_gid(f"prediction:{style.label}")


def _beside(axes: Axes) -> Transform:
    return offset_copy(axes.transData, axes.get_figure(root=True), x=BESIDE, units="points")
