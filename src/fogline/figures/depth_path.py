"""Lyman-continuum optical depth from sources downwards."""

from __future__ import annotations

import numpy as np
from matplotlib import colormaps
from matplotlib.figure import Figure

from fogline.figures.bands import draw_band, table_band
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import ONE_COLUMN, add_note, legend_above, new_figure, styled
from fogline.figures.transmission import MAP


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw the optical depth against the redshift below each source.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    table = inputs.tables["depth_path"]
    redshifts = np.unique(np.asarray(table["z_source"], float))
    shades = colormaps[MAP](np.linspace(0.0, 0.85, len(redshifts)))
    figure = new_figure(inputs, ONE_COLUMN, 2.6)
    axes = figure.subplots()
    top = 0.0
    for z, colour in zip(redshifts, shades, strict=True):
        rows = table[np.asarray(table["z_source"], float) == z]
        band = table_band(rows, "dz", "")
        top = max(top, float(band.median[-1]))
        draw_band(axes, band, colour=colour, label=f"$z = {z:g}$", outer="none")
    axes.axhline(1.0, color="0.5", linewidth=0.6)
    axes.set_xlim(0.0, float(table["dz"].max()))
    axes.set_ylim(0.0, min(1.05 * top, 4.0))
    axes.set_xlabel(r"redshift below the source $z_\mathrm{em} - z_{912}$")
    axes.set_ylabel("Lyman-continuum optical depth")
    legend_above(figure, axes)
    add_note(figure, ["68% bands. At a depth of one the unit-depth free path ends."])
    return figure
