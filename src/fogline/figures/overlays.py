"""Derived quantities of several analyses over one another."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Final

import numpy as np
from astropy.table import Table
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fogline.faults import Fault, InputError, nearest
from fogline.figures.axis import COLUMN_LABEL
from fogline.figures.bands import Band, draw_band, rows_at, table_band
from fogline.figures.comparison import LABELS
from fogline.figures.style import COLOURS, TWO_COLUMNS, add_note, readable, styled
from fogline.headlines import HEADLINES

LINES: Final = ("-", "--", "-.", ":")
HEADLINE_OF: Final = {(h.table, h.curve): h.quantity for h in HEADLINES}
F_TABLE: Final = "column_distribution"

Results = Mapping[str, Mapping[str, Table]]


@styled
def draw_overlays(results: Results, overlays: Sequence[str]) -> Figure:
    """Draw the 68% bands of chosen quantities, a panel each.

    Parameters
    ----------
    results : mapping of str to mapping of str to astropy.table.Table
        Derived tables by analysis and name; log f is drawn less that of the first analysis.
    overlays : sequence of str
        ``table/curve``, or ``table`` where it has one curve only.

    Returns
    -------
    matplotlib.figure.Figure

    Raises
    ------
    InputError
        Where a table or curve is not there.
    """
    n_columns = 2
    n_rows = -(-len(overlays) // n_columns)
    figure = Figure(figsize=(TWO_COLUMNS, 0.5 + 2.0 * n_rows), layout="constrained")
    panels = figure.subplots(n_rows, n_columns, squeeze=False).ravel()
    for axes, overlay in zip(panels, overlays, strict=False):
        _draw_panel(axes, results, overlay)
    for axes in panels[len(overlays) :]:
        axes.remove()
    figure.legend(*panels[0].get_legend_handles_labels(), loc="outside upper center", ncols=3)
    add_note(figure, ["Medians and 68% bands. log f is that of each analysis less the first's."])
    return figure


def _draw_panel(axes: Axes, results: Results, overlay: str) -> None:
    table_name, _, curve = overlay.partition("/")
    reference: Band | None = None
    label, unit = "", ""
    for number, (analysis, tables) in enumerate(results.items()):
        table, x, prefix = _curve(tables, table_name, curve, overlay)
        band = table_band(table, x, prefix)
        if table_name == F_TABLE:
            reference = band if reference is None else reference
            band = _less(band, reference)
        colour = COLOURS[number % len(COLOURS)]
        line = LINES[number % len(LINES)]
        draw_band(axes, band, colour=colour, line=line, label=readable(analysis), outer="none")
        column = table[f"{prefix}_median" if prefix else "median"]
        unit = f" [{column.unit.to_string('latex_inline')}]" if column.unit else ""
        quantity = HEADLINE_OF.get((table_name, curve), curve or table_name)
        label = LABELS.get(quantity, readable(quantity))
    along_columns = table_name == F_TABLE or x == "log_nhi"
    axes.set_xlabel(COLUMN_LABEL if along_columns else readable(x))
    axes.set_ylabel(r"$\Delta \log f$ [dex]" if table_name == F_TABLE else label + unit)
    axes.margins(x=0.0)


def _curve(
    tables: Mapping[str, Table], name: str, curve: str, overlay: str
) -> tuple[Table, str, str]:
    """Return the rows, the column that they run along, and the prefix of the band columns."""
    if name not in tables:
        what = f"overlays: '{overlay}' names no derived table; {nearest(name, tables)}"
        raise InputError([Fault("config", 1, what)])
    table = tables[name]
    curves = [c.removesuffix("median").removesuffix("_") for c in table.colnames]
    curves = [c for c, full in zip(curves, table.colnames, strict=True) if full.endswith("median")]
    if curve not in curves:
        what = f"overlays: '{overlay}' names no curve of {name}; {nearest(curve, curves)}"
        raise InputError([Fault("config", 1, what)])
    if "log_nhi" in table.colnames:
        return rows_at(table, float(table["z"][0])), "log_nhi", curve
    return table, str(table.colnames[0]), curve


def _less(band: Band, reference: Band) -> Band:
    shift = np.interp(band.x, reference.x, reference.median)
    names = ("median", "lo68", "hi68", "lo95", "hi95")
    return Band(band.x, **{name: getattr(band, name) - shift for name in names})
