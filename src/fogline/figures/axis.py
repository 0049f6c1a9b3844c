"""Axes that several figures have in common."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.axis import Axis
from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter
from numpy.typing import NDArray

from fogline.datasets import DataSet
from fogline.derived.base import DLA_LOG_NHI, LLS_LOG_NHI, SUB_DLA_LOG_NHI
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import SMALL

Array = NDArray[np.float64]

COLUMN_LABEL: Final = r"$\log_{10}\,(N_\mathrm{HI}\,/\,\mathrm{cm}^{-2})$"

CLASSES: Final = (
    ("LLS", LLS_LOG_NHI, SUB_DLA_LOG_NHI),
    ("sub-DLA", SUB_DLA_LOG_NHI, DLA_LOG_NHI),
    ("DLA", DLA_LOG_NHI, np.inf),
)
"""Classes of absorbers and their column ranges."""

UNMEASURED_NOTE: Final = "Grey: no $f(N)$ data; prior and integral constraints only."
"""What `shade_unmeasured` means."""

PAST_DATA: Final = 0.05
"""Room past data that lie outside the redshifts of the tables."""

PLAIN_DECADES: Final = 2.5
"""Log axes of fewer decades than this carry plain numbers, others powers of ten."""


def redshift_axis(axes: Axes, inputs: FigureInputs, datasets: Iterable[DataSet] = ()) -> None:
    """Label the redshift axis and fit it to the tables and to data beyond them."""
    z = inputs.fit.analysis.derive.redshifts
    axes.set_xlabel("redshift $z$")
    ends = [(float(data.z_lo.min()), float(data.z_hi.max())) for data in datasets]
    before = [lo - PAST_DATA for lo, _ in ends if lo < z[0]]
    beyond = [hi + PAST_DATA for _, hi in ends if hi > z[-1]]
    axes.set_xlim(min([z[0], *before]), max([z[-1], *beyond]))


def plain_log_ticks(axis: Axis) -> None:
    """Give a short logarithmic axis plain numbers at 1, 2, 5."""
    lo, hi = axis.get_view_interval()
    if np.log10(hi / lo) > PLAIN_DECADES:
        return
    axis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axis.set_minor_formatter(NullFormatter())


def column_axis(axes: Axes, inputs: FigureInputs) -> None:
    """Label the column-density axis and cut it to the pivots."""
    axes.set_xlabel(COLUMN_LABEL)
    axes.set_xlim(*inputs.fit.setting.column_range)


def mark_classes(axes: Axes) -> None:
    """Draw the borders between classes of absorbers and name them along the top."""
    lo, hi = axes.get_xlim()
    for name, first, last in CLASSES:
        if not lo < first < hi:
            continue
        axes.axvline(first, 0.0, 0.92, color="0.6", linewidth=0.6, linestyle=":", zorder=0.5)
        middle = 0.5 * (first + min(last, hi))
        axes.text(
            middle,
            0.975,
            name,
            transform=axes.get_xaxis_transform(),
            ha="center",
            va="top",
            fontsize=SMALL,
            color="0.35",
        )


def unmeasured_columns(inputs: FigureInputs) -> list[tuple[float, float]]:
    """Return column ranges between the pivots in which no data set counted absorbers."""
    bins = sorted(
        (float(lo), float(hi))
        for data in inputs.fit.response.datasets
        for lo, hi in data.column_bins
    )
    first, last = inputs.fit.setting.column_range
    gaps, reached = [], first
    for lo, hi in [*bins, (last, last)]:
        if lo > reached + 1e-6:
            gaps.append((reached, lo))
        reached = max(reached, hi)
    return gaps


def shade_unmeasured(axes: Axes, inputs: FigureInputs, label: str = "_unmeasured") -> None:
    """Shade the columns of `unmeasured_columns`."""
    for lo, hi in unmeasured_columns(inputs):
        axes.axvspan(lo, hi, facecolor="0.93", edgecolor="none", zorder=0, label=label)
        label = "_unmeasured"
