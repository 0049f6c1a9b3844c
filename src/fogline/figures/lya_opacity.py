"""Lyα effective optical depth against redshift, and what higher lines of the series add."""

from __future__ import annotations

import numpy as np
from matplotlib.figure import Figure
from numpy.typing import NDArray

from fogline.datasets import DataSet
from fogline.derived.base import LLS_LOG_NHI
from fogline.figures.axis import plain_log_ticks, redshift_axis
from fogline.figures.bands import draw_band, table_band
from fogline.figures.conventions import other_columns
from fogline.figures.data_points import ToDisplay
from fogline.figures.inputs import FigureInputs
from fogline.figures.shown import Shown, convention_note, draw_along_z
from fogline.figures.style import ONE_COLUMN, add_note, legend_above, new_figure, styled
from fogline.quantities.lyman_series_opacity import LINES

Array = NDArray[np.float64]

SYMBOLS = {name: rf"Ly$\{name}$" for name in LINES}
"""Higher lines in labels."""

FORM_NOTES = {"tau": "", "mean_flux": r"$-\ln F$", "decrement": r"$-\ln(1-D)$"}
"""How a label says that the file states something else than an optical depth."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw τ_eff with its bands and every data set, as an optical depth.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    setting = inputs.fit.setting
    shown = [
        Shown(
            data,
            to_tau(data),
            other_columns(data, setting, -np.inf, LLS_LOG_NHI),
            note=FORM_NOTES[data.meta["form"]],
        )
        for data in inputs.of_quantity("lya_opacity")
    ]
    series = inputs.of_quantity("lyman_series_opacity")
    shown += [
        Shown(data, to_tau(data), series_note(data), filled=False, note=FORM_NOTES[form])
        for data in series
        for form in [data.meta["form"]]
    ]
    figure = new_figure(inputs, ONE_COLUMN, 2.6)
    axes = figure.subplots()
    draw_band(axes, table_band(inputs.tables["lya_opacity"], "z"), label="fit (68%, 95%)")
    draw_along_z(axes, inputs, shown)
    axes.set_ylabel(r"Ly$\alpha$ effective optical depth $\tau_\mathrm{eff}$")
    axes.set_yscale("log")
    redshift_axis(axes, inputs, [*inputs.of_quantity("lya_opacity"), *series])
    plain_log_ticks(axes.yaxis)
    legend_above(figure, axes)
    columns = rf"Curve: $\log N = {setting.column_range[0]:g}$–${LLS_LOG_NHI:g}$."
    add_note(figure, [columns, *convention_note(shown)])
    return figure


def series_note(data: DataSet) -> str:
    """Return which line a data set of a higher line speaks of, and of what in front of it."""
    symbol = SYMBOLS[data.meta["line"]]
    return symbol if data.meta["foreground"] == "removed" else f"{symbol} with foreground"


def to_tau(data: DataSet) -> ToDisplay:
    """Return the map from a file's form to optical depth, one to one."""
    form = data.meta["form"]
    if form == "mean_flux":
        return lambda flux: -np.log(flux)
    if form == "decrement":
        return lambda decrement: -np.log1p(-decrement)
    return lambda tau: tau
