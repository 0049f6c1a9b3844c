"""Calibration by simulation: how far ranks of the truth are from uniform, quantity by quantity."""

from __future__ import annotations

from collections.abc import Sequence
from textwrap import shorten
from typing import Any, Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import ArrayLike, NDArray

from fogline.figures.style import MODEL, SMALL, TWO_COLUMNS, WARNING, add_note, readable, styled
from fogline.trust.ranks import (
    ALPHA,
    UniformBand,
    checked,
    counts_below,
    rank_table,
    uniform_band,
)

Array = NDArray[np.float64]

MOST_PANELS: Final = 24
"""Quantities that are drawn: those whose ranks are the least uniform."""

COLUMNS: Final = 4
PANEL_HEIGHT: Final = 1.15
"""Height of one row of panels [in]."""

NAME_WIDTH: Final = 34
"""Characters of a quantity's name above its panel."""

FINE: Final = 8
"""Points between two ranks, so that colours change where curve and band cross."""


@styled
def draw_calibration(
    ranks: ArrayLike, n_draws: int, names: Sequence[str], alpha: float = ALPHA
) -> Figure:
    """Draw the empirical distribution of ranks less that of uniform ones, in a panel a quantity.

    Parameters
    ----------
    ranks : array_like of int, shape (n_replicates, n_quantities)
        Ranks of the truth, 0 ... `n_draws`; ties broken at random.
    n_draws : int
        Number of independent posterior draws of each replicate.
    names : sequence of str
        Names of the quantities.
    alpha : float
        Chance that any curve of calibrated posteriors leaves its band.

    Returns
    -------
    matplotlib.figure.Figure
        Worst first, at most `MOST_PANELS`; the band is that of all quantities, drawn or not.
    """
    table = rank_table(ranks, n_draws, names, alpha)
    ranks = checked(ranks, n_draws, names)
    band = uniform_band(len(ranks), n_draws, alpha, len(names))
    curves = counts_below(ranks, n_draws) / len(ranks)
    # Many p-values are the smallest that there is: among those the largest excess is the worst.
    excess = np.abs(curves - band.at).max(axis=1)
    worst = np.lexsort((-excess, np.asarray(table["p_uniform"])))[:MOST_PANELS]
    n_columns = min(COLUMNS, len(worst))
    n_rows = -(-len(worst) // n_columns)
    width = TWO_COLUMNS * max(2, n_columns) / COLUMNS
    figure = Figure(figsize=(width, 0.5 + PANEL_HEIGHT * n_rows), layout="constrained")
    grid = figure.subplots(n_rows, n_columns, sharex=True, sharey=True, squeeze=False)
    panels = list(grid.ravel())
    for axes, index in zip(panels, worst, strict=False):
        _draw_panel(axes, curves[index], band)
        _name(axes, names[index], str(table["flag"][index]))
    reach = _reach(curves[worst], band)
    # The words of a flag stand below the curves.
    panels[0].set_ylim(-1.45 * reach if any(table["flag"][worst]) else -reach, reach)
    _dress(panels, len(worst), n_columns)
    add_note(figure, _notes(table.meta, len(worst), len(names)))
    return figure


def _closed(values: Array, start: float, end: float) -> Array:
    return np.concatenate([[start], values, [end]])


def _draw_panel(axes: Axes, curve: Array, band: UniformBand) -> None:
    at = _closed(band.at, 0.0, 1.0)
    lo, hi, found = (_closed(y, 0.0, 1.0) - at for y in (band.lo, band.hi, curve))
    axes.axhline(0.0, color="0.5", linewidth=0.5, zorder=1.0)
    axes.fill_between(at, lo, hi, color="0.85", linewidth=0.0, zorder=0.5)
    x = np.interp(np.arange(FINE * (len(at) - 1) + 1) / FINE, np.arange(len(at)), at)
    y, least, most = (np.interp(x, at, values) for values in (found, lo, hi))
    outside = (y < least - 1e-12) | (y > most + 1e-12)
    axes.plot(x, y, color=MODEL, linewidth=0.9, zorder=2.0, gid="curve")
    if outside.any():
        red = np.where(outside, y, np.nan)
        axes.plot(x, red, color=WARNING, linewidth=1.4, zorder=3.0, gid="outside")


def _name(axes: Axes, name: str, flag: str) -> None:
    axes.set_title(shorten(readable(name), NAME_WIDTH, placeholder=" …"), fontsize=8.0, pad=2.5)
    if flag:
        axes.text(
            0.5,
            0.05,
            flag.replace(", ", ",\n"),
            transform=axes.transAxes,
            ha="center",
            va="bottom",
            color=WARNING,
            fontsize=SMALL,
            linespacing=1.0,
            zorder=4.0,
        )


def _reach(curves: Array, band: UniformBand) -> float:
    ends = (curves - band.at, band.hi - band.at, band.lo - band.at)
    return 1.12 * max(float(np.abs(end).max()) for end in ends)


def _dress(panels: list[Axes], n_drawn: int, n_columns: int) -> None:
    panels[0].set_xlim(0.0, 1.0)
    panels[0].set_xticks([0.25, 0.5, 0.75], ["0.25", "0.5", "0.75"])
    for index, axes in enumerate(panels):
        if index >= n_drawn:
            axes.remove()
            continue
        if index + n_columns >= n_drawn:  # the lowest of its column
            axes.tick_params(axis="x", labelbottom=True)
        if index + n_columns >= len(panels):
            axes.set_xlabel("rank / draws")
        if index % n_columns == 0:
            axes.set_ylabel(r"$\Delta$ share")


def _notes(meta: dict[str, Any], n_drawn: int, n_quantities: int) -> list[str]:
    share = 1.0 - float(meta["alpha"])
    first = (
        "Share of ranks of the truth up to each rank, minus that of uniform ranks; "
        f"{meta['n_replicates']} replicates, {meta['n_draws']} draws each. Shaded: where the curves"
        f" of all {n_quantities} quantities stay with probability {share:g} if posteriors are"
        " calibrated. Red: outside."
    )
    if n_drawn == n_quantities:
        return [first]
    return [first, f"The {n_drawn} least uniform of {n_quantities} quantities, worst first."]
