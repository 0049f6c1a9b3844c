"""Which columns absorb at the Lyman limit, and which hold the H I mass."""

from __future__ import annotations

from typing import Any

from matplotlib.figure import Figure

from fogline.figures.axis import (
    UNMEASURED_NOTE,
    column_axis,
    mark_classes,
    shade_unmeasured,
)
from fogline.figures.bands import draw_band, rows_at, table_band
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import MODEL, ONE_COLUMN, SECOND_MODEL, add_note, new_figure, styled


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw the shares of opacity and mass per dex of column, with their 68% bands.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    reference = inputs.fit.setting.distribution.reference_redshift
    rows = rows_at(inputs.tables["opacity_budget"], reference)
    figure = new_figure(inputs, ONE_COLUMN, 4.0)
    axes, lower = figure.subplots(2, sharex=True, height_ratios=[1.5, 1.0])
    for name, label, colour, line in (
        ("opacity", "opacity at 912 Å", MODEL, "-"),
        ("mass", r"H$\,$I mass", SECOND_MODEL, "--"),
    ):
        look: dict[str, Any] = {"colour": colour, "line": line, "label": label, "outer": "none"}
        draw_band(axes, table_band(rows, "log_nhi", f"{name}_share"), **look)
        draw_band(lower, table_band(rows, "log_nhi", f"{name}_cumulative"), **look)
    for panel in (axes, lower):
        shade_unmeasured(panel, inputs)
    column_axis(lower, inputs)
    lower.set_ylim(0.0, 1.0)
    lower.set_ylabel("share below")
    axes.set_ylim(0.0, 1.12 * axes.get_ylim()[1])
    axes.set_ylabel("share per dex of column [dex$^{-1}$]")
    mark_classes(axes)
    axes.legend(loc="upper left", title=f"$z = {rows['z'][0]:g}$ (68%)", alignment="left")
    add_note(figure, [UNMEASURED_NOTE])
    return figure
