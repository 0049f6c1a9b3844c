"""Bands of the derived tables as curves with shaded intervals."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from astropy.table import Table
from matplotlib.axes import Axes
from numpy.typing import NDArray

from fogline.figures.style import MODEL
from fogline.tables import BAND_QUANTILES

Array = NDArray[np.float64]


OUTER_NOTE: Final = "Shaded: 68%, dotted: 95%."
"""What ``outer="lines"`` means."""


@dataclass(frozen=True)
class Band:
    """A median curve with its 68% and 95% intervals, each of shape (n,)."""

    x: Array
    median: Array
    lo68: Array
    hi68: Array
    lo95: Array
    hi95: Array

    def relative(self) -> Band:
        """Return the band with its median taken off."""
        names = BAND_QUANTILES
        return Band(self.x, **{name: getattr(self, name) - self.median for name in names})


def table_band(table: Table, x: str, quantity: str = "", *, scale: float = 1.0) -> Band:
    """Return a band of a derived table.

    Parameters
    ----------
    table : astropy.table.Table
    x : str
        Column along which it runs.
    quantity : str
        Prefix of the band columns; none where the table has a single quantity.
    scale : float
        Unit factor for the axis.
    """
    prefix = f"{quantity}_" if quantity else ""
    columns = {name: scale * np.asarray(table[prefix + name], float) for name in BAND_QUANTILES}
    return Band(np.asarray(table[x], float), **columns)


def rows_at(table: Table, z: float) -> Table:
    """Return the rows of a table along columns at one of its redshifts, the one nearest `z`."""
    redshifts = np.asarray(table["z"], float)
    nearest = redshifts[np.argmin(np.abs(redshifts - z))]
    return table[redshifts == nearest]


def draw_band(
    axes: Axes,
    band: Band,
    *,
    colour: str = MODEL,
    line: str = "-",
    label: str = "",
    outer: str = "fill",
    **kwargs: Any,
) -> None:
    """Draw a band: median line, 68% interval, and the 95% one fainter.

    Parameters
    ----------
    axes : Axes
    band : Band
        Infinite ends (a free path beyond reach) run off the axis.
    colour, line : str
        Colour of all, style of the median line.
    label : str
        For the legend; none if empty.
    outer : {"fill", "lines", "none"}
        How the 95% interval is drawn; as lines where two bands overlap.
    **kwargs
        Passed to the median line.
    """
    fills = {"lo95": 0.15, "lo68": 0.30} if outer == "fill" else {"lo68": 0.30}
    for lo, alpha in fills.items():
        lower = _within_reach(getattr(band, lo))
        upper = _within_reach(getattr(band, lo.replace("lo", "hi")))
        axes.fill_between(
            band.x, lower, upper, color=colour, alpha=alpha, linewidth=0.0, zorder=1.5
        )
    for name in ("lo95", "hi95") if outer == "lines" else ():
        ends95 = _within_reach(getattr(band, name))
        axes.plot(band.x, ends95, ":", color=colour, linewidth=0.7, zorder=1.8, label="_95")
    median = np.where(np.isfinite(band.median), band.median, np.nan)
    axes.plot(
        band.x, median, color=colour, linestyle=line, zorder=2, label=label or "_median", **kwargs
    )


def _within_reach(values: Array) -> Array:
    """Return values with infinity far above the finite ones."""
    finite = np.isfinite(values)
    if finite.all() or not finite.any():
        return values
    return np.where(finite, values, 1e3 * values[finite].max())
