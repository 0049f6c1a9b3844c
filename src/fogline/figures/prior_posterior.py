"""Prior against posterior of every parameter: where the data speak."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from fogline.figures.axis import UNMEASURED_NOTE, column_axis, shade_unmeasured
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import (
    COLOURS,
    MODEL,
    ONE_COLUMN,
    add_note,
    legend_above,
    new_figure,
    styled,
)
from fogline.tables import bands

Array = NDArray[np.float64]

SHIFT: Final = 0.09
"""Distance of prior and posterior from their column [dex]."""

SEGMENT_SHIFT: Final = 0.3
"""Distance of the exponents of neighbouring redshift segments [dex]."""

LINEAR_WIDTH: Final = 0.05
"""Deviations below this [dex] are on a linear scale, larger ones on a logarithmic one."""

TICKS: Final = (-10.0, -1.0, -0.1, 0.0, 0.1, 1.0, 10.0)

PRIOR: Final = "0.55"
POSTERIOR: Final = COLOURS[0]


@dataclass(frozen=True)
class Compared:
    """Bands of a group of parameters under the prior and the posterior."""

    columns: Array
    prior: dict[str, Array]
    posterior: dict[str, Array]

    @property
    def width_ratio(self) -> Array:
        """Posterior over prior width of the 68% intervals, shape (n,)."""
        widths = [b["hi68"] - b["lo68"] for b in (self.posterior, self.prior)]
        return np.asarray(widths[0] / widths[1])


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw prior and posterior intervals of log f and the exponents, and the ratio of widths.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    distribution = inputs.fit.setting.distribution
    n_pivots, n_exponents, _ = distribution.shape
    middle = np.median(inputs.theta, axis=0)
    log_f = _compare(inputs, distribution.pivots, slice(n_pivots), middle[:n_pivots])
    columns = [
        pivot + SEGMENT_SHIFT * i
        for i in range(len(distribution.segments))
        for pivot in distribution.evolution_pivots
    ]
    exponents = _compare(inputs, columns, slice(n_pivots, n_pivots + n_exponents), 0.0)
    others = inputs.fit.prior.names[n_pivots + n_exponents :]
    figure = new_figure(inputs, ONE_COLUMN, 4.6 + (1.6 if others else 0.0))
    heights = [1.4, 1.0, 1.0, *([1.0] if others else [])]
    upper, lower, ratio, *rest = figure.subplots(len(heights), height_ratios=heights)
    for axes in (upper, lower):
        axes.sharex(ratio)
        axes.tick_params(labelbottom=False)
    if others:
        _draw_others(rest[0], inputs, others)
    for axes, compared, label in (
        (upper, log_f, "$\\log f$ $-$ posterior\nmedian [dex]"),
        (lower, exponents, r"exponent $\gamma$ of $(1+z)$"),
    ):
        _draw_intervals(axes, compared)
        axes.set_ylabel(label)
    _draw_ratios(ratio, log_f, exponents)
    upper.set_yscale("asinh", linear_width=LINEAR_WIDTH)
    upper.set_yticks(TICKS, [f"${tick:g}$" for tick in TICKS])
    upper.tick_params(axis="y", which="minor", left=False, right=False)
    for axes in (upper, lower, ratio):
        shade_unmeasured(axes, inputs)
    column_axis(ratio, inputs)
    lo, hi = inputs.fit.setting.column_range
    ratio.set_xlim(lo - 0.3, hi + 0.3)
    legend_above(figure, upper)
    figure.align_ylabels()
    notes = ["Thick: 68%, thin: 95%.", UNMEASURED_NOTE]
    if distribution.breaks:
        notes.append(f"Exponents side by side: {', '.join(distribution.segments)}.")
    add_note(figure, notes)
    return figure


def _compare(
    inputs: FigureInputs, columns: Sequence[float], chosen: slice, zero: Array | float
) -> Compared:
    prior, posterior = (draws[:, chosen] - zero for draws in (inputs.prior_theta, inputs.theta))
    return Compared(np.array(columns), bands(prior), bands(posterior))


def _draw_intervals(axes: Axes, compared: Compared) -> None:
    for side, band, colour, marker, label in (
        (-SHIFT, compared.prior, PRIOR, "s", "prior"),
        (SHIFT, compared.posterior, POSTERIOR, "o", "posterior"),
    ):
        x = compared.columns + side
        axes.vlines(x, band["lo95"], band["hi95"], color=colour, linewidth=0.8)
        axes.vlines(x, band["lo68"], band["hi68"], color=colour, linewidth=2.4)
        axes.plot(x, band["median"], marker, color=colour, markersize=3.0, label=label)


def _draw_others(axes: Axes, inputs: FigureInputs, names: Sequence[str]) -> None:
    """Draw parameters that belong to no column, in units of their prior's half width."""
    chosen = slice(len(inputs.fit.prior.names) - len(names), None)
    raw = _compare(inputs, range(len(names)), chosen, 0.0)
    half = 0.5 * (raw.prior["hi68"] - raw.prior["lo68"])
    standard = [
        {name: (x - raw.prior["median"]) / half for name, x in band.items()}
        for band in (raw.prior, raw.posterior)
    ]
    _draw_intervals(axes, Compared(raw.columns, *standard))
    axes.set_xticks(raw.columns, [_two_lines(name) for name in names], fontsize=7.0)
    axes.tick_params(axis="x", which="minor", bottom=False, top=False)
    axes.set_xlim(-0.6, len(names) - 0.4)
    axes.set_ylabel("shift [prior\nhalf width]")


def _two_lines(name: str) -> str:
    kind, _, of = name.rstrip("]").partition("[")
    return f"{kind.replace('_', ' ')}\n{of.replace('_', ' ')}"


def _draw_ratios(axes: Axes, log_f: Compared, exponents: Compared) -> None:
    axes.plot(log_f.columns, log_f.width_ratio, "o-", color=MODEL, label=r"$\log f$")
    axes.plot(
        exponents.columns,
        exponents.width_ratio,
        "s--",
        color=MODEL,
        markerfacecolor="white",
        label=r"$\gamma$",
    )
    axes.axhline(1.0, color="0.5", linewidth=0.6)
    axes.set_yscale("log")
    axes.set_ylim(0.3 * axes.get_ylim()[0], 2.0)
    axes.set_ylabel("posterior / prior\n68% width")
    axes.legend(loc="lower left", ncols=2)
