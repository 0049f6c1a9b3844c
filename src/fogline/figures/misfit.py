"""Where the fit misses: every row against all the others, and tests of every data set."""

from __future__ import annotations

from typing import Final

import numpy as np
from astropy.table import Table
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from scipy.special import ndtri

from fogline.figures.inputs import FigureInputs
from fogline.figures.style import (
    ONE_COLUMN,
    SMALL,
    WARNING,
    add_note,
    dataset_styles,
    new_figure,
    readable,
    styled,
)
from fogline.trust.discrepancies import TESTS
from fogline.trust.leave_one_out import FARTHEST

SHADES: Final = "Greys"
DARKEST: Final = 4.0
"""σ of the darkest cell."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw leave-one-out scores along redshift, and the significance of every test.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    tests = inputs.tables["discrepancies"]
    names = list(dict.fromkeys(data.name for data in inputs.fit.response.datasets))
    figure = new_figure(inputs, ONE_COLUMN, 3.0 + 0.2 * len(names))
    axes, lower = figure.subplots(2, height_ratios=[2.2, 0.2 * len(names) + 0.3])
    _draw_scores(axes, inputs)
    _draw_tests(lower, tests, names)
    level = float(inputs.tables["predictive"].meta["row_level"])
    add_note(
        figure,
        [
            "Above: each row against the fit without it; dashed: the score beyond which a row is "
            f"flagged ($p = {level:.1g}$). Limits are left out. Below: $\\sigma$ of each test; "
            "red: flagged.",
        ],
    )
    return figure


def _draw_scores(axes: Axes, inputs: FigureInputs) -> None:
    table = inputs.tables["predictive"]
    for sigma, shade in ((2.0, "0.95"), (1.0, "0.88")):
        axes.axhspan(-sigma, sigma, facecolor=shade, edgecolor="none", zorder=0)
    level = float(table.meta["row_level"])
    for sign in (-1.0, 1.0):
        axes.axhline(sign * ndtri(0.5 * level), color=WARNING, linewidth=0.7, linestyle="--")
    pit = np.clip(np.asarray(table["loo_pit"], float), FARTHEST, 1.0 - FARTHEST)
    reach = max(3.5, -1.15 * float(ndtri(0.5 * level)))
    for data in inputs.fit.response.datasets:
        rows = np.flatnonzero(np.asarray(table["dataset"]) == data.name)
        rows = rows[data.limit[data.visible] == 0]
        style = dataset_styles(inputs.fit)[data.name]
        score = ndtri(pit[rows])
        reach = max(reach, 1.15 * float(np.abs(score).max(initial=0.0)))
        axes.plot(
            np.asarray(table["z"], float)[rows],
            score,
            style.marker,
            color=style.colour,
            markersize=3.5,
            label=style.label,
            gid=f"data:{style.label}",
        )
    axes.set_ylim(-reach, reach)
    axes.set_xlabel("redshift")
    axes.set_ylabel(r"leave-one-out score [$\sigma$]")


def _draw_tests(axes: Axes, table: Table, names: list[str]) -> None:
    grid = np.full((len(names), len(TESTS)), np.nan)
    for row in table:
        where = names.index(str(row["dataset"])), TESTS.index(str(row["test"]))
        grid[where] = float(row["sigma"])
        axes.text(
            where[1],
            where[0],
            f"{row['sigma']:.1f}",
            ha="center",
            va="center",
            fontsize=SMALL,
            color=WARNING if str(row["flag"]) == "misfit" else "k",
            weight="bold" if str(row["flag"]) == "misfit" else "normal",
        )
    # Pale on purpose: the darkest cell must leave its number readable.
    axes.imshow(grid, cmap=SHADES, vmin=0.0, vmax=2.0 * DARKEST, aspect="auto")
    axes.set_xticks(range(len(TESTS)), TESTS)
    axes.set_yticks(range(len(names)), [readable(name) for name in names])
    axes.tick_params(which="both", length=0.0)
    axes.minorticks_off()
