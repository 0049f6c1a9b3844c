"""A family of analyses side by side, and what they say together."""

from __future__ import annotations

from typing import Final

import numpy as np
from astropy.table import Table
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fogline.figures.axis import COLUMN_LABEL
from fogline.figures.comparison import quantity_label
from fogline.figures.style import COLOURS, MODEL, ONE_COLUMN, add_note, readable, styled

ALONG: Final = "log_f("


@styled
def draw_family(combined: Table, weights: Table) -> Figure:
    """Draw log f of every member and of the stacked mixture, and headline quantities below.

    Parameters
    ----------
    combined, weights : astropy.table.Table
        From `fogline.trust.families`.

    Returns
    -------
    matplotlib.figure.Figure
    """
    names = [str(name) for name in weights["analysis"]]
    along = np.array([str(q).startswith(ALONG) for q in combined["quantity"]])
    headlines = combined[~along]
    figure = Figure(figsize=(ONE_COLUMN, 3.2 + 0.15 * len(headlines)), layout="constrained")
    axes, lower = figure.subplots(2, height_ratios=[1.6, 0.4 + 0.15 * len(headlines)])
    _draw_along(axes, combined[along], names, weights)
    _draw_headlines(lower, headlines, names)
    figure.legend(*axes.get_legend_handles_labels(), loc="outside upper left", ncols=1)
    share = np.asarray(headlines["equal_choice_share"], float)
    share = share[np.isfinite(share)]
    notes = ["Bands: 68%, less the median of the stacked mixture; below in units of its error."]
    if len(share):
        notes.append(
            f"With equal weights {100 * np.median(share):.0f}% (median) to "
            f"{100 * share.max():.0f}% (largest) of squared errors is choice of pivots and priors."
        )
    add_note(figure, notes)
    return figure


def _draw_along(axes: Axes, rows: Table, names: list[str], weights: Table) -> None:
    log_nhi = np.array([float(str(q)[len(ALONG) : -1]) for q in rows["quantity"]])
    middle = np.asarray(rows["stacked_median"], float)
    lo, hi = (np.asarray(rows[f"stacked_{end}"], float) - middle for end in ("lo68", "hi68"))
    axes.fill_between(log_nhi, lo, hi, color=MODEL, alpha=0.25, linewidth=0.0, label="stacked")
    for number, name in enumerate(names):
        colour = COLOURS[number % len(COLOURS)]
        row = weights[number]
        label = (
            f"{readable(name)} (stacking {row['weight_stacking']:.2f}, "
            f"evidence {row['weight_evidence']:.2g})"
        )
        for end, line in (("median", "-"), ("lo68", ":"), ("hi68", ":")):
            values = np.asarray(rows[f"{name}_{end}"], float) - middle
            axes.plot(
                log_nhi,
                values,
                line,
                color=colour,
                linewidth=0.9,
                label=label if end == "median" else "_band",
            )
    reach = 1.3 * float(np.abs([lo, hi]).max())
    axes.set_ylim(-reach, reach)
    axes.set_xlabel(COLUMN_LABEL)
    axes.set_ylabel(r"$\Delta \log f$ [dex]")
    axes.margins(x=0.0)


def _draw_headlines(axes: Axes, rows: Table, names: list[str]) -> None:
    middle = np.asarray(rows["stacked_median"], float)
    half = 0.5 * (np.asarray(rows["stacked_hi68"], float) - np.asarray(rows["stacked_lo68"], float))
    half = np.where(np.isfinite(half) & (half > 0.0), half, np.nan)
    axes.axvspan(-1.0, 1.0, facecolor="0.88", edgecolor="none", zorder=0)
    axes.axvline(0.0, color="0.5", linewidth=0.6, zorder=0.5)
    for number, name in enumerate(names):
        value, lo, hi = (
            (np.asarray(rows[f"{name}_{end}"], float) - middle) / half
            for end in ("median", "lo68", "hi68")
        )
        y = np.arange(len(rows)) + 0.7 * (number - 0.5 * (len(names) - 1)) / len(names)
        good = np.isfinite(value) & np.isfinite(lo) & np.isfinite(hi)
        axes.errorbar(
            value[good],
            y[good],
            xerr=[(value - lo)[good], (hi - value)[good]],
            fmt="o",
            color=COLOURS[number % len(COLOURS)],
            markersize=2.2,
            elinewidth=0.7,
        )
    labels = [quantity_label(str(row["quantity"]), float(row["z"])) for row in rows]
    axes.set_yticks(range(len(rows)), labels)
    axes.set_ylim(len(rows) - 0.5, -0.5)
    axes.tick_params(axis="y", which="both", length=0.0)
    axes.set_xlabel(r"less the stacked median [$\sigma$]")
