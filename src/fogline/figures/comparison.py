"""How far the conclusions of other analyses lie from those of the first."""

from __future__ import annotations

from textwrap import shorten
from typing import Final

import numpy as np
from astropy.table import Table
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from fogline.figures.style import (
    COLOURS,
    MARKERS,
    ONE_COLUMN,
    add_note,
    readable,
    styled,
)

LABELS: Final = {
    "tau_eff": r"$\tau_\mathrm{eff}$",
    "lx_lls_tau2": r"$\ell(X)$, $\tau_{912} \geq 2$",
    "lx_dla": r"$\ell(X)$, DLAs",
    "mean_free_path_local": r"$\lambda_\mathrm{mfp}$, local",
    "mean_free_path_unit_depth": r"$\lambda_\mathrm{mfp}$, unit depth",
    "rho_hi": r"$\rho_\mathrm{HI}$",
}
"""Labels of quantities; ``log_f[N]`` is spelt out by `quantity_label`."""

MOST_NAMED: Final = 4
LONGEST: Final = 70
"""Changes that are named below a figure, and their length in characters."""

SHADES: Final = ((2.0, "0.95"), (1.0, "0.88"))


@styled
def draw_comparison(table: Table) -> Figure:
    """Draw the shift of every headline quantity, in units of its error, for each analysis.

    Parameters
    ----------
    table : astropy.table.Table
        As `fogline.comparison.compare` returns it.

    Returns
    -------
    matplotlib.figure.Figure

    Raises
    ------
    ValueError
        If the table has no rows.
    """
    if not len(table):
        raise ValueError("nothing to compare: the table has no rows")
    reference = readable(str(table["reference"][0]))
    note = (
        f"Shifts from {reference}, over the error of the difference: what both share of data "
        "and prior has dropped out. Missing marks: that error is too small to tell."
    )
    return _draw(table, "shift_sigma", r"shift of the median [$\sigma$]", [note])


@styled
def draw_changes(table: Table) -> Figure:
    """Draw how far every headline quantity has moved since a previous results folder.

    Parameters
    ----------
    table : astropy.table.Table
        As `fogline.changes.changes` returns it.

    Returns
    -------
    matplotlib.figure.Figure
    """
    changed = [shorten(str(what), LONGEST) for what in table.meta["changed"]]
    more = f"; {len(changed) - MOST_NAMED} more, see the table" if len(changed) > MOST_NAMED else ""
    named = "; ".join(changed[:MOST_NAMED])
    note = f"Now minus before, over the present error. Changed: {named}{more}."
    return _draw(table, "change_sigma", r"change of the median [$\sigma$]", [note])


def _draw(table: Table, column: str, label: str, notes: list[str]) -> Figure:
    lines = list(dict.fromkeys(zip(table["quantity"], table["z"], strict=True)))
    analyses = list(dict.fromkeys(str(name) for name in table["analysis"]))
    figure = Figure(figsize=(ONE_COLUMN, 1.1 + 0.165 * len(lines)), layout="constrained")
    axes = figure.subplots()
    for sigma, shade in SHADES:
        axes.axvspan(-sigma, sigma, facecolor=shade, edgecolor="none", zorder=0)
    axes.axvline(0.0, color="0.5", linewidth=0.6, zorder=0.5)
    for number, analysis in enumerate(analyses):
        rows = table[np.asarray(table["analysis"], str) == analysis]
        _draw_analysis(axes, rows, lines, number, len(analyses), column)
    _dress(axes, np.abs(np.asarray(table[column], float)), lines, label)
    figure.legend(loc="outside upper center", ncols=2)
    add_note(figure, notes)
    return figure


def quantity_label(quantity: str, z: float) -> str:
    """Return the label of a quantity at a redshift."""
    if quantity.startswith("log_f["):
        label = rf"$\log f(10^{{{quantity[6:-1]}}})$"
    else:
        label = LABELS.get(quantity, readable(quantity))
    return f"{label}, $z = {z:g}$"


def _draw_analysis(
    axes: Axes,
    rows: Table,
    lines: list[tuple[str, float]],
    number: int,
    n_analyses: int,
    column: str,
) -> None:
    y = np.array([lines.index((row["quantity"], row["z"])) for row in rows], dtype=float)
    y += 0.5 * (number - 0.5 * (n_analyses - 1)) / n_analyses
    axes.plot(
        np.asarray(rows[column], float),
        y,
        MARKERS[number % len(MARKERS)],
        color=COLOURS[number % len(COLOURS)],
        markersize=3.5,
        label=readable(str(rows["analysis"][0])),
        zorder=3,
    )


def _dress(
    axes: Axes, shifts: NDArray[np.float64], lines: list[tuple[str, float]], label: str
) -> None:
    reach = max(2.5, 1.1 * float(shifts[np.isfinite(shifts)].max(initial=0.0)))
    axes.set_xlim(-reach, reach)
    axes.set_ylim(len(lines) - 0.5, -0.5)
    axes.set_xlabel(label)
    axes.set_yticks(range(len(lines)), [quantity_label(*line) for line in lines])
    axes.tick_params(axis="y", which="both", length=0.0)
