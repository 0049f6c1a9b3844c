"""Whether independent samplers say the same."""

from __future__ import annotations

from typing import Final

import numpy as np
from astropy.table import Table
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fogline.figures.comparison import quantity_label
from fogline.figures.style import (
    COLOURS,
    MARKERS,
    TWO_COLUMNS,
    WARNING,
    add_note,
    readable,
    styled,
)
from fogline.trust.agreement import REFERENCE

SHOWN: Final = ((0.16, "16% quantile"), (0.5, "median"), (0.84, "84% quantile"))

HALF: Final = 0.35
"""Least half width of a panel [σ]."""


@styled
def draw_agreement(table: Table) -> Figure:
    """Draw quantiles of every sampler minus those of the ensembles, in σ of the posterior.

    Parameters
    ----------
    table : astropy.table.Table
        From `fogline.trust.agreement.agreement_table`.

    Returns
    -------
    matplotlib.figure.Figure
    """
    quantities = [q for q in dict.fromkeys(map(str, table["quantity"])) if q != "ln_evidence"]
    figure = Figure(figsize=(TWO_COLUMNS, 1.5 + 0.15 * len(quantities)), layout="constrained")
    panels = figure.subplots(1, len(SHOWN), sharey=True)
    runs = list(dict.fromkeys(zip(map(str, table["sampler"]), table["run"], strict=True)))
    others = [run for run in runs if run[0] != REFERENCE]
    for axes, (quantile, title) in zip(panels, SHOWN, strict=True):
        axes.axvspan(-0.1, 0.1, facecolor="0.93", edgecolor="none", zorder=0)
        axes.axvline(0.0, color="0.5", linewidth=0.6, zorder=0.5)
        for number, run in enumerate(others):
            _draw_run(axes, table, run, quantile, quantities, number, len(others))
        reach = max(HALF, 1.05 * max(abs(x) for x in axes.get_xlim()))
        axes.set_xlim(-reach, reach)
        axes.set_title(title)
    panels[0].set_yticks(range(len(quantities)), [_label(q) for q in quantities])
    panels[0].set_ylim(len(quantities) - 0.5, -0.5)
    for axes in panels:
        axes.tick_params(axis="y", which="both", length=0.0)
    figure.supxlabel(rf"difference from {REFERENCE} [$\sigma$]")
    figure.legend(*panels[0].get_legend_handles_labels(), loc="outside upper center", ncols=3)
    add_note(figure, [*map(str, table.meta["verdicts"]), "Grey: 0.1 σ; bars: Monte Carlo errors."])
    return figure


def _draw_run(
    axes: Axes,
    table: Table,
    run: tuple[str, int],
    quantile: float,
    quantities: list[str],
    number: int,
    n_runs: int,
) -> None:
    chosen = (np.asarray(table["sampler"]) == run[0]) & (np.asarray(table["run"]) == run[1])
    chosen &= np.isclose(np.asarray(table["quantile"], float), quantile)
    rows = table[chosen]
    difference = np.asarray(rows["difference_sigma"], float)
    with np.errstate(divide="ignore", invalid="ignore"):
        error = np.abs(difference / np.asarray(rows["difference_errors"], float))
    y = np.array([quantities.index(str(q)) for q in rows["quantity"]], dtype=float)
    y += 0.6 * (number - 0.5 * (n_runs - 1)) / max(n_runs, 1)
    usable = bool(rows["usable"].all())
    label = readable(run[0]) + (f", run {run[1] + 1}" if n_runs > 1 else "")
    axes.errorbar(
        difference,
        y,
        xerr=np.nan_to_num(error),
        fmt=MARKERS[number % len(MARKERS)],
        color=COLOURS[number % len(COLOURS)] if usable else WARNING,
        markersize=3.0,
        elinewidth=0.8,
        label=label if usable else f"{label} (its runs disagree)",
    )


def _label(key: str) -> str:
    quantity, _, z = key.partition("@")
    return quantity_label(quantity, float(z)) if z else readable(quantity)
