"""The column-density distribution with every data set that measures it, and residuals."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MultipleLocator
from numpy.typing import NDArray

from fogline.datasets import SHOWN, DataSet
from fogline.figures.axis import UNMEASURED_NOTE, column_axis, shade_unmeasured
from fogline.figures.bands import Band, draw_band, rows_at, table_band
from fogline.figures.conventions import joined, other_cosmology
from fogline.figures.data_points import ToDisplay, along_columns, draw_points
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import (
    ONE_COLUMN,
    DataStyle,
    add_note,
    dataset_styles,
    new_figure,
    styled,
)
from fogline.quantities import Setting

Array = NDArray[np.float64]
Counted = tuple[DataSet, Array]
"""A data set, and the 68% band of its predictions, shape (3, n_rows)."""

QUANTITY: Final = "column_distribution"
LIST: Final = "absorber_list"

LARGEST_RESIDUAL: Final = 1.2
"""Half height of the residual panel at most [dex]."""

RESIDUAL_NOTE: Final = (
    "Lower panel: each bin against the prediction at its own redshift and in its own convention; "
    "band: uncertainty of the fit."
)

F_LABEL: Final = r"$\log_{10}\,[f(N_\mathrm{HI},X)\,/\,\mathrm{cm}^2]$"


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw log f with bands at one redshift, data per dX, and residuals of all data.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    datasets = _counted(inputs)
    z = _redshift(inputs, datasets)
    rows = rows_at(inputs.tables[QUANTITY], z)
    band = table_band(rows, "log_nhi")
    figure = new_figure(inputs, ONE_COLUMN, 4.1)
    main, residual = figure.subplots(2, sharex=True, height_ratios=[2.3, 1.0])
    column_axis(residual, inputs)
    _draw_main(main, inputs, band, datasets, z=float(rows["z"][0]))
    _draw_residuals(residual, inputs, band, datasets)
    figure.align_ylabels()
    add_note(figure, [UNMEASURED_NOTE, RESIDUAL_NOTE])
    return figure


def _counted(inputs: FigureInputs) -> list[Counted]:
    """Return every data set that counted absorbers by column, with its predictions."""
    counted: list[Counted] = []
    for data in inputs.fit.response.datasets:
        if data.quantity == QUANTITY:
            counted.append((data, inputs.predicted(data)))
        elif data.quantity == LIST:
            bins = data.role == SHOWN
            counted.append((in_bins(data, inputs.fit.setting), inputs.predicted(data)[:, bins]))
    return counted


def in_bins(data: DataSet, setting: Setting) -> DataSet:
    """Return the bins of a list of absorbers as counts over the whole path.

    Parameters
    ----------
    data : DataSet
        An absorber list.
    setting : Setting
        Gives the absorption distance of the path.
    """
    assert data.role is not None
    rows = np.flatnonzero(data.role == SHOWN)
    path = data.extras["path_weight"] @ setting.cosmology.dx_dz(data.extras["path_z"])
    names = ("z_lo", "z_hi", "observed", "err_lo", "err_hi", "limit", "log_nhi_lo", "log_nhi_hi")
    columns = {name: getattr(data, name)[rows] for name in names}
    search_path = np.full(len(rows), float(path))
    meta = {**data.meta, "per": "dX"}
    return replace(data, **columns, search_path=search_path, counts=True, meta=meta, role=None)


def to_log_f(data: DataSet) -> ToDisplay:
    """Return the map from a file's numbers to log10 f: identity but for counts."""
    if not data.counts:
        return lambda log_f: log_f
    path = data.search_path * (10.0**data.log_nhi_hi - 10.0**data.log_nhi_lo)
    return lambda count: np.log10(count / path)


def _redshift(inputs: FigureInputs, datasets: list[Counted]) -> float:
    """Return the median redshift of the data; the reference redshift where there are none."""
    if not datasets:
        return inputs.fit.setting.distribution.reference_redshift
    return float(np.median(np.concatenate([data.z for data, _ in datasets])))


def _draw_main(
    axes: Axes, inputs: FigureInputs, band: Band, datasets: list[Counted], z: float
) -> None:
    styles = dataset_styles(inputs.fit)
    shade_unmeasured(axes, inputs)
    draw_band(axes, band, label=f"fit at $z = {z:g}$ (68%, 95%)")
    pivots = np.array(inputs.fit.setting.distribution.pivots)
    axes.plot(
        pivots,
        np.interp(pivots, band.x, band.median),
        "|",
        color="k",
        markersize=7.0,
        zorder=3,
        label="pivots",
    )
    for data, _ in datasets:
        style = styles[data.name]
        label = f"{style.label}, {joined(_particulars(data, inputs.fit.setting))}"
        if data.meta["per"] == "dX":
            draw_points(axes, along_columns(data, to_log_f(data)), style, label=label)
        else:
            _draw_key(axes, style, label)
    axes.set_ylabel(F_LABEL)
    axes.yaxis.set_major_locator(MultipleLocator(5.0))
    axes.set_ylim(band.lo68.min() - 1.0, band.hi68.max() + 1.0)
    axes.legend(loc="lower left")


def _particulars(data: DataSet, setting: Setting) -> Iterator[str]:
    """Yield what a label says of a data set beside its name."""
    lo, hi = data.z_lo.min(), data.z_hi.max()
    yield f"$z = {lo:.3g}$" + ("" if lo == hi else f"–${hi:.3g}$")
    yield other_cosmology(data, setting)
    if data.quantity == LIST:
        yield "as counted"
    if data.meta["per"] != "dX":
        yield "per d$z$: below only"


def _draw_key(axes: Axes, style: DataStyle, label: str) -> None:
    """Put a data set into the legend that the panel itself can't show."""
    axes.plot([], [], style.marker, color=style.colour, markersize=4.0, label=label)


def _draw_residuals(axes: Axes, inputs: FigureInputs, band: Band, datasets: list[Counted]) -> None:
    styles = dataset_styles(inputs.fit)
    shade_unmeasured(axes, inputs)
    draw_band(axes, band.relative())
    reach = [0.2]
    for data, band_of_data in datasets:
        predicted = to_log_f(data)(band_of_data)[1]
        points = along_columns(data, _less(to_log_f(data), predicted))
        draw_points(axes, points, styles[data.name])
        ends = np.abs([points.y_lo, points.y_hi])
        reach.append(float(ends[np.isfinite(ends)].max(initial=0.0)))
    half = min(1.15 * max(reach), LARGEST_RESIDUAL)
    axes.set_ylim(-half, half)
    axes.set_ylabel(r"data $-$ fit [dex]")


def _less(to_display: ToDisplay, predicted: Array) -> ToDisplay:
    return lambda values: to_display(values) - predicted
