"""By how much measurements that nobody made yet would shrink the errors of derived quantities."""

from __future__ import annotations

from typing import Final

import numpy as np
from astropy.table import Table
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fogline.figures.comparison import LABELS
from fogline.figures.style import (
    COLOURS,
    LEGEND_LINE,
    MARKERS,
    ONE_COLUMN,
    add_note,
    readable,
    styled,
)

FAMILY_LABELS: Final = {**LABELS, "log_f": r"$\log f(N)$"}
"""Labels of families of quantities."""

LEAST_ROW: Final = 0.3
"""Least height of a candidate [in]."""

MARK: Final = 0.06
"""Distance of neighbouring marks of a candidate [in]: they stay apart where ratios are equal."""

SPREAD: Final = 0.8
"""Share of a candidate's height that its marks take."""

CAPTION: Final = (
    "Marks: mean over redshifts and columns, with Monte Carlo error; thin lines: all of them. "
    "Assumes the fitted model and the stated errors."
)
FAILED: Final = "Open marks: importance weights fail; upper bounds from linear regression."
UNKNOWN: Final = "Where marks are missing, a prediction or the quantity is not finite."


@styled
def draw_forecast(table: Table) -> Figure:
    """Draw the expected errors of every family of quantities with each candidate, over those now.

    Parameters
    ----------
    table : astropy.table.Table
        As `fogline.trust.forecast.forecast_table` returns it.

    Returns
    -------
    matplotlib.figure.Figure
        Candidates from the top in the order of the table: the most useful first.

    Raises
    ------
    ValueError
        If the table has no rows.
    """
    if not len(table):
        raise ValueError("there are no candidates: the table has no rows")
    candidates = list(dict.fromkeys(str(name) for name in table["candidate"]))
    family = np.array([family_of(str(name)) for name in table["quantity"]])
    order = [name for name in FAMILY_LABELS if name in family]
    families = [*order, *sorted(set(family) - set(order))]
    n_lines = -(-len(families) // 2)
    row = max(LEAST_ROW, MARK * len(families) / SPREAD)
    height = 0.55 + row * len(candidates) + LEGEND_LINE * n_lines
    figure = Figure(figsize=(ONE_COLUMN, height), layout="constrained")
    axes = figure.subplots()
    axes.axvline(1.0, color="0.5", linewidth=0.6, zorder=0.5)
    for number, name in enumerate(families):
        offset = SPREAD * ((number + 0.5) / len(families) - 0.5)
        _draw_family(axes, table[family == name], name, number, candidates, offset)
    for edge in np.arange(1, len(candidates)) - 0.5:
        axes.axhline(edge, color="0.85", linewidth=0.5, zorder=0.4)
    _dress(axes, table, candidates)
    figure.legend(loc="outside upper center", ncols=2)
    add_note(figure, _notes(table))
    return figure


def family_of(quantity: str) -> str:
    """Return the family of a quantity: its name without the column that it stands at."""
    return quantity.partition("[")[0]


def _draw_family(
    axes: Axes, rows: Table, name: str, number: int, candidates: list[str], offset: float
) -> None:
    colour, marker = COLOURS[number % len(COLOURS)], MARKERS[number % len(MARKERS)]
    label: str | None = FAMILY_LABELS.get(name, readable(name))
    ratio, error = (np.asarray(rows[key], float) for key in ("ratio", "ratio_error"))
    of = np.asarray(rows["candidate"], str)
    for y, candidate in enumerate(candidates):
        here = (of == candidate) & np.isfinite(ratio)
        if not here.any():
            continue
        x = ratio[here]
        axes.plot([x.min(), x.max()], [y + offset] * 2, color=colour, linewidth=0.5, alpha=0.7)
        failed = bool(np.asarray(rows["unreliable"], bool)[here].any())
        axes.errorbar(
            x.mean(),
            y + offset,
            # Outcomes and draws are the same for all members: their errors do not average out.
            xerr=error[here].mean(),
            fmt=marker,
            color=colour,
            markersize=3.5,
            markerfacecolor="white" if failed else colour,
            elinewidth=1.3,
            zorder=3,
        )
    # Filled in the legend, whatever the first candidate is like.
    axes.plot([], [], marker, color=colour, markersize=3.5, label=label)


def _dress(axes: Axes, table: Table, candidates: list[str]) -> None:
    ratio = np.asarray(table["ratio"], float)
    ends = ratio + np.asarray(table["ratio_error"], float)
    axes.set_xlim(0.0, max(1.08, 1.03 * float(ends[np.isfinite(ends)].max(initial=0.0))))
    axes.set_ylim(len(candidates) - 0.5, -0.5)
    axes.set_xlabel("expected error over the error now")
    axes.set_yticks(range(len(candidates)), [readable(name) for name in candidates])
    axes.tick_params(axis="y", which="both", length=0.0)


def _notes(table: Table) -> list[str]:
    finite = np.isfinite(np.asarray(table["ratio"], float))
    failed = np.asarray(table["unreliable"], bool)
    notes = [CAPTION]
    if (failed & finite).any():
        notes.append(FAILED)
    if not finite.all():
        notes.append(UNKNOWN)
    return notes
