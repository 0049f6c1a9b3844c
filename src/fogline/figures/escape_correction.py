"""Transmission of single sightlines through filters: what a correction by the mean hides."""

from __future__ import annotations

from typing import Final

import numpy as np
from matplotlib.figure import Figure

from fogline.figures.inputs import FigureInputs
from fogline.figures.style import (
    COLOURS,
    ONE_COLUMN,
    add_note,
    legend_above,
    new_figure,
    readable,
    styled,
)

WIDTH: Final = 0.5
"""Share of the distance between sources that their filters fill."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw, for every filter and source, the scatter of sightlines and the mean.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    scatter, mean = inputs.tables["sightline_scatter"], inputs.tables["escape_correction"]
    names = list(dict.fromkeys(map(str, scatter["filter"])))
    redshifts = np.unique(np.asarray(scatter["z_source"], float))
    gap = np.diff(redshifts).min() if len(redshifts) > 1 else 1.0
    figure = new_figure(inputs, ONE_COLUMN, 2.8)
    axes = figure.subplots()
    for i, name in enumerate(names):
        here = np.array([str(value) == name for value in scatter["filter"]])
        colour = COLOURS[i % len(COLOURS)]
        shift = gap * WIDTH * (i - 0.5 * (len(names) - 1)) / len(names)
        x = np.asarray(scatter["z_source"][here], float) + shift
        band = {
            key: np.asarray(scatter[f"transmission_{key}"][here], float)
            for key in ("median", "lo68", "hi68", "lo95", "hi95")
        }
        axes.vlines(x, band["lo95"], band["hi95"], color=colour, linewidth=0.9)
        axes.vlines(x, band["lo68"], band["hi68"], color=colour, linewidth=3.0)
        axes.plot(x, band["median"], "o", color="white", markeredgecolor=colour, markersize=3.5)
        axes.errorbar(
            x + 0.12 * gap * WIDTH,
            np.asarray(mean["mean_transmission_median"][here], float),
            yerr=[
                np.asarray(mean["mean_transmission_median"] - mean["mean_transmission_lo68"])[here],
                np.asarray(mean["mean_transmission_hi68"] - mean["mean_transmission_median"])[here],
            ],
            fmt="D",
            color=colour,
            markersize=3.5,
            label=readable(name),
        )
    axes.set_xlabel("redshift of the source")
    axes.set_ylabel("transmission through the filter")
    axes.set_ylim(-0.02, 1.02)
    axes.set_xlim(redshifts[0] - 0.6 * gap, redshifts[-1] + 0.6 * gap)
    legend_above(figure, axes)
    add_note(
        figure,
        [
            "Bars: single sightlines (68%, 95%), circles: their median. Diamonds: mean over "
            "sightlines with its posterior error.",
            "A correction by the mean is right for stacks, not for one source.",
        ],
    )
    return figure
