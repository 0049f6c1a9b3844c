"""Mean transmission against wavelength, and the composite spectra that were fitted."""

from __future__ import annotations

from typing import Final

import numpy as np
from matplotlib import colormaps
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fogline.atomic import LYMAN_LIMIT
from fogline.figures.bands import draw_band, table_band
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import (
    ONE_COLUMN,
    add_note,
    dataset_styles,
    legend_above,
    new_figure,
    styled,
)

MAP: Final = "cividis"
"""Colours of source redshifts."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw the transmission towards every source, and composite fluxes below where there are any.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    composites = inputs.of_quantity("continuum_flux")
    figure = new_figure(inputs, ONE_COLUMN, 4.6 if composites else 2.8)
    panels = figure.subplots(2 if composites else 1, squeeze=False)[:, 0]
    _draw_curves(panels[0], inputs)
    if composites:
        _draw_composites(panels[1], inputs)
    legend_above(figure, panels[0])
    notes = ["Means over sightlines, 68% bands; dotted: the source's Lyman limit."]
    if composites:
        notes.append("Below: composite spectra; band: the fit in the file's own convention (68%).")
    add_note(figure, notes)
    return figure


def _draw_curves(axes: Axes, inputs: FigureInputs) -> None:
    table = inputs.tables["transmission"]
    redshifts = np.unique(np.asarray(table["z_source"], float))
    shades = colormaps[MAP](np.linspace(0.0, 0.85, len(redshifts)))
    for z, colour in zip(redshifts, shades, strict=True):
        rows = table[np.asarray(table["z_source"], float) == z]
        band = table_band(rows, "wavelength", "total")
        label = f"$z = {z:g}$"
        draw_band(axes, band, colour=colour, label=label, outer="none")
        limit = LYMAN_LIMIT * (1.0 + z)
        axes.axvline(limit, color=colour, linewidth=0.7, linestyle=":")
    axes.set_xlabel(r"observed wavelength [$\mathrm{\AA}$]")
    axes.set_ylabel("mean transmission")
    axes.set_ylim(0.0, 1.05)
    axes.margins(x=0.0)


def _draw_composites(axes: Axes, inputs: FigureInputs) -> None:
    styles = dataset_styles(inputs.fit)
    for data in inputs.of_quantity("continuum_flux"):
        assert data.wavelength_lo is not None
        assert data.wavelength_hi is not None
        style = styles[data.name]
        middle = 0.5 * (data.wavelength_lo + data.wavelength_hi)
        errors = np.nan_to_num([data.err_lo, data.err_hi])
        points = axes.errorbar(
            middle,
            data.observed,
            yerr=errors,
            xerr=0.5 * (data.wavelength_hi - data.wavelength_lo),
            fmt=style.marker,
            color=style.colour,
            elinewidth=0.9,
            label=f"{style.label} ($z = {data.z[0]:.3g}$)",
        )
        points[0].set_gid(f"data:{style.label}")
        lo, median, hi = inputs.predicted(data)
        order = np.argsort(middle)
        axes.fill_between(
            middle[order], lo[order], hi[order], color=style.colour, alpha=0.25, linewidth=0.0
        )
        (line,) = axes.plot(middle[order], median[order], color=style.colour, linewidth=0.9)
        line.set_gid(f"prediction:{style.label}")
    axes.set_xlabel(r"rest wavelength [$\mathrm{\AA}$]")
    axes.set_ylabel("flux over reference")
    axes.legend(loc="upper left")
