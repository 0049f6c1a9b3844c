"""Who disagrees with whom: hold-outs, kinds against each other, and what moves."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
from astropy.table import Table
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from fogline.figures.comparison import quantity_label
from fogline.figures.style import (
    MODEL,
    ONE_COLUMN,
    SMALL,
    TWO_COLUMNS,
    WARNING,
    add_note,
    readable,
    styled,
)

Array = NDArray[np.float64]

REACH: Final = 4.0
"""σ of the strongest colour of a map."""


@styled
def draw_tension(tension: Table, pairwise: Table) -> Figure:
    """Draw the tension of every hold-out, and below it every kind against every other.

    Parameters
    ----------
    tension, pairwise : astropy.table.Table
        From `fogline.trust.tension_tables`.

    Returns
    -------
    matplotlib.figure.Figure
    """
    kinds = list(dict.fromkeys([*map(str, pairwise["fitted"]), *map(str, pairwise["predicted"])]))
    heights = [0.5 + 0.18 * len(tension), 0.35 + 0.24 * len(kinds)]
    rows = 2 if kinds else 1
    figure = Figure(
        figsize=(ONE_COLUMN, 0.6 + sum(heights[:rows]) + 0.7 * (rows - 1)), layout="constrained"
    )
    panels = figure.subplots(rows, squeeze=False, height_ratios=heights[:rows])[:, 0]
    _draw_hold_outs(panels[0], tension)
    level = float(tension.meta["sigma_level"])
    notes = [
        f"Each data set against all others. Dashed: flagged ({level:.1f} $\\sigma$). Filled: "
        "reweighted joint posterior; open: refitted; arrows: data above (right) or below (left)."
    ]
    if kinds:
        _draw_map(panels[1], pairwise, kinds)
        notes.append("Below: $\\sigma$ of a kind (across) against the fit of another alone (down).")
    add_note(figure, notes)
    return figure


def _draw_hold_outs(axes: Axes, table: Table) -> None:
    sigma = np.asarray(table["sigma"], float)
    offset = np.asarray(table["offset"], float)
    y = np.arange(len(table))
    level = float(table.meta["sigma_level"])
    axes.axvline(level, color=WARNING, linewidth=0.8, linestyle="--", zorder=1)
    for i in y:
        colour = WARNING if str(table["flag"][i]) not in ("", "--") else MODEL
        refitted = str(table["how"][i]) == "refitted"
        axes.plot([0.0, sigma[i]], [i, i], color=colour, linewidth=0.8, zorder=2)
        axes.plot(
            sigma[i],
            i,
            ">" if offset[i] > 0.0 else "<",
            color=colour,
            markerfacecolor="white" if refitted else colour,
            markersize=4.5,
            zorder=3,
        )
    axes.set_yticks(y, [readable(str(group)) for group in table["group"]])
    axes.set_ylim(len(table) - 0.5, -0.5)
    axes.set_xlim(0.0, max(1.15 * level, 1.1 * float(sigma.max(initial=0.0))))
    axes.tick_params(axis="y", which="both", length=0.0)
    axes.set_xlabel(r"tension with all other data [$\sigma$]")


def _draw_map(axes: Axes, table: Table, kinds: Sequence[str]) -> None:
    grid = np.full((len(kinds), len(kinds)), np.nan)
    for row in table:
        grid[kinds.index(str(row["fitted"])), kinds.index(str(row["predicted"]))] = row["sigma"]
    labels = [readable(kind) for kind in kinds]
    _map(axes, grid, labels, labels, cmap="Reds", low=0.0)
    axes.set_ylabel("fitted alone")


@styled
def draw_shifts(table: Table) -> Figure:
    """Draw how headline quantities move without each group, in σ of the difference.

    Parameters
    ----------
    table : astropy.table.Table
        From `fogline.trust.tension_tables.shift_table`.

    Returns
    -------
    matplotlib.figure.Figure
    """
    groups = list(dict.fromkeys(map(str, table["group"])))
    lines = list(dict.fromkeys(zip(map(str, table["quantity"]), table["z"], strict=True)))
    grid = np.full((len(lines), len(groups)), np.nan)
    for row in table:
        where = lines.index((str(row["quantity"]), row["z"])), groups.index(str(row["group"]))
        grid[where] = row["shift_sigma"]
    width = min(TWO_COLUMNS, 2.2 + 0.36 * len(groups))
    figure = Figure(figsize=(width, 1.6 + 0.165 * len(lines)), layout="constrained")
    axes = figure.subplots()
    rows = [quantity_label(*line) for line in lines]
    _map(axes, grid, rows, [readable(group) for group in groups], cmap="RdBu_r", low=-REACH)
    axes.set_xlabel("left out")
    add_note(
        figure,
        [
            "Value with all data minus value without, over the error of that difference. Empty: "
            "the data set hardly changes the error."
        ],
    )
    return figure


def _map(
    axes: Axes, grid: Array, rows: Sequence[str], columns: Sequence[str], *, cmap: str, low: float
) -> None:
    """Draw numbers on a coloured map."""
    axes.imshow(grid, cmap=cmap, vmin=1.6 * low, vmax=1.6 * REACH, aspect="auto")
    for (i, j), value in np.ndenumerate(grid):
        if np.isfinite(value):
            text = f"{round(value, 1) + 0.0:.1f}".replace("-", "−")  # no minus zero
            axes.text(j, i, text, ha="center", va="center", fontsize=SMALL)
    axes.set_yticks(range(len(rows)), rows)
    axes.set_xticks(range(len(columns)), columns, rotation=90)
    axes.tick_params(which="both", length=0.0)
    axes.minorticks_off()
