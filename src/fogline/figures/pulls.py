"""Pulls of every row, data set by data set."""

from __future__ import annotations

from textwrap import fill
from typing import Any, Final

import numpy as np
from astropy.table import Table
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from fogline.datasets import DataSet
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import (
    ONE_COLUMN,
    SMALL,
    WARNING,
    DataStyle,
    add_note,
    dataset_styles,
    new_figure,
    styled,
)

Array = NDArray[np.float64]

LABEL_WIDTH: Final = 16
"""Characters of a line of a data set's name."""

SPREAD: Final = 0.34
"""Half height over which the rows of a data set are spread, in units of its strip."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw the pull of every row in a strip a data set, its p-value at the right.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    table = inputs.tables["predictive"]
    datasets = inputs.fit.response.datasets
    styles = dataset_styles(inputs.fit)
    figure = new_figure(inputs, ONE_COLUMN, 0.9 + 0.36 * len(datasets))
    axes = figure.subplots()
    for sigma, shade in ((2.0, "0.95"), (1.0, "0.88")):
        axes.axvspan(-sigma, sigma, facecolor=shade, edgecolor="none", zorder=0)
    for strip in range(1, len(datasets)):
        axes.axhline(strip - 0.5, color="0.8", linewidth=0.4, zorder=0.4)
    axes.axvline(0.0, color="0.5", linewidth=0.6, zorder=0.5)
    for strip, data in enumerate(datasets):
        rows = table[np.asarray(table["dataset"]) == data.name]
        _draw_strip(axes, strip, data, rows, styles[data.name])
        _print_p_value(axes, strip, table.meta["datasets"][data.name])
    _dress(
        axes,
        [fill(styles[data.name].label, LABEL_WIDTH) for data in datasets],
        np.asarray(table["pull"], float),
    )
    add_note(figure, _notes(table, datasets))
    return figure


def _draw_strip(axes: Axes, strip: int, data: DataSet, rows: Table, style: DataStyle) -> None:
    pulls = np.asarray(rows["pull"], float)
    y = strip + (np.linspace(-SPREAD, SPREAD, len(pulls)) if len(pulls) > 1 else np.zeros(1))
    limited = data.limit[data.visible] != 0
    for chosen, face in ((~limited, style.colour), (limited, "white")):
        axes.plot(
            pulls[chosen],
            y[chosen],
            style.marker,
            color=style.colour,
            markerfacecolor=face,
            markeredgewidth=0.7,
            markersize=3.5,
            gid=f"data:{style.label}",
            zorder=3,
        )
    outside = _outside(rows)
    axes.plot(pulls[outside], y[outside], "o", color=WARNING, fillstyle="none", markersize=8.0)


def _outside(rows: Table) -> NDArray[np.bool_]:
    # Not `!= ""`: an empty cell comes back from a file as a masked one.
    return np.array([str(flag) == "outside" for flag in rows["flag"]])


def _print_p_value(axes: Axes, strip: int, summary: dict[str, Any]) -> None:
    axes.text(
        1.02,
        strip,
        _p_text(float(summary["p_value"])),
        transform=axes.get_yaxis_transform(),
        va="center",
        fontsize=SMALL,
        color=WARNING if summary["flag"] else "k",
    )


def _p_text(p_value: float) -> str:
    return "$p < 0.001$" if p_value < 0.001 else f"$p = {p_value:.3f}$"


def _dress(axes: Axes, labels: list[str], pulls: Array) -> None:
    reach = max(3.2, 1.1 * float(np.abs(pulls[np.isfinite(pulls)]).max(initial=0.0)))
    axes.set_xlim(-reach, reach)
    axes.set_xlabel(r"pull (observed $-$ predicted) / $\sigma$")
    axes.set_yticks(range(len(labels)), labels)
    axes.set_ylim(len(labels) - 0.5, -0.5)
    axes.tick_params(axis="y", which="both", length=0.0)
    axes.tick_params(axis="y", which="minor", left=False, right=False)


def _notes(table: Table, datasets: tuple[DataSet, ...]) -> list[str]:
    notes = ["Rows from top to bottom as in the file. $p$: posterior predictive, by data set."]
    if any((data.limit[data.visible] != 0).any() for data in datasets):
        notes.append("Open: limits, against the measurement behind them.")
    if _outside(table).any():
        level = float(table.meta["row_level"])
        notes.append(f"Red rings: at odds with all other rows (leave-one-out $p < {level:.1g}$).")
    return notes
