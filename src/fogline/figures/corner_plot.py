"""One- and two-dimensional marginals of all parameters."""

from __future__ import annotations

from typing import Final

import corner
import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import FixedLocator, MaxNLocator

from fogline.figures.inputs import FigureInputs
from fogline.figures.style import MODEL, TWO_COLUMNS, WARNING, styled

SMOOTHING: Final = 1.2
"""Width of the smoothing in histogram bins."""

BINS: Final = 22

TINY: Final = 5.5
"""Print of tick labels [pt]: 13 panels share the page's width."""

EDGE: Final = 0.17
"""Share of an axis at each end that carries no tick."""

LEVELS: Final = tuple(1.0 - np.exp(-0.5 * np.array([1.0, 2.0]) ** 2))
"""Probability within one and two sigma of a two-dimensional normal."""

SPAN: Final = (0.0005, 0.9995)
"""Quantiles at the ends of the axes."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw the marginals of every parameter and pair, contours at 39% and 86%.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    figure = Figure(figsize=(TWO_COLUMNS, TWO_COLUMNS))
    labels = short_labels(inputs)
    corner.corner(
        inputs.theta,
        bins=BINS,
        range=[tuple(ends) for ends in np.quantile(inputs.theta, SPAN, axis=0).T],
        labels=labels,
        levels=LEVELS,
        smooth=SMOOTHING,
        color=MODEL,
        plot_datapoints=False,
        plot_density=False,
        fill_contours=True,
        max_n_ticks=3,
        labelpad=0.2,
        contour_kwargs={"linewidths": 0.5},
        hist_kwargs={"linewidth": 0.8},
        fig=figure,
    )
    _tidy(figure)
    _caption(figure, inputs)
    return figure


def short_labels(inputs: FigureInputs) -> list[str]:
    """Return log f and gamma with their columns as subscripts, and the names of the others."""
    distribution = inputs.fit.setting.distribution
    labels = [rf"$\log f_{{{pivot:g}}}$" for pivot in distribution.pivots]
    for segment in distribution.segments:
        below = f", {segment}" if segment else ""
        labels += [rf"$\gamma_{{{pivot:g}{below}}}$" for pivot in distribution.evolution_pivots]
    others = inputs.fit.prior.names[len(labels) :]
    return labels + [_broken(name) for name in others]


def _broken(name: str) -> str:
    """Return a name such as scale[my_data] in two lines."""
    kind, _, of = name.rstrip("]").partition("[")
    return f"{kind.replace('_', ' ')}\n{of.replace('_', ' ')}"


def _tidy(figure: Figure) -> None:
    figure.subplots_adjust(
        left=0.075, bottom=0.075, right=0.995, top=0.995, wspace=0.06, hspace=0.06
    )
    for axes in figure.axes:
        axes.minorticks_off()
        axes.tick_params(labelsize=TINY, length=1.5, width=0.4, pad=1.0, top=False, right=False)
        axes.xaxis.label.set_fontsize(7.5)
        axes.yaxis.label.set_fontsize(7.5)
        for side in axes.spines.values():
            side.set_linewidth(0.4)
        for axis in (axes.xaxis, axes.yaxis):
            # Only axes to which corner gave ticks: the others are blank and stay so.
            if isinstance(axis.get_major_locator(), MaxNLocator):
                axis.set_major_locator(FixedLocator(_inner_ticks(*axis.get_view_interval())))


def _inner_ticks(lo: float, hi: float) -> list[float]:
    """Return round numbers inside an axis: at its ends they would run into the next panel's."""
    margin = EDGE * (hi - lo)
    inner: list[float] = []
    for n_steps in range(3, 9):
        ticks = MaxNLocator(n_steps).tick_values(lo, hi)
        inner = [float(tick) for tick in ticks if lo + margin < tick < hi - margin]
        if len(inner) >= 2:
            break
    return inner[:: max(len(inner) - 1, 1)]


def _caption(figure: Figure, inputs: FigureInputs) -> None:
    settings = inputs.fit.setting.distribution
    text = (
        r"$\log f_p$: $\log_{10}\,(f / \mathrm{cm}^2)$ at $N_\mathrm{HI} = 10^p\,\mathrm{cm}^{-2}$,"
        f" $z = {settings.reference_redshift:g}$\n"
        r"$\gamma_p$: exponent of $(1+z)$ at that column"
        "\ncontours: 39% and 86% (1σ and 2σ)"
    )
    figure.text(0.985, 0.975, text, ha="right", va="top", fontsize=9.0, linespacing=1.5)
    if not inputs.converged:
        figure.text(
            0.985, 0.89, "not converged", ha="right", va="top", color=WARNING, weight="bold"
        )
