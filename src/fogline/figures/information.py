"""Which data set speaks where along log N, and where only the prior does."""

from __future__ import annotations

from typing import Final

import numpy as np
from matplotlib.figure import Figure

from fogline.figures.axis import column_axis, mark_classes, plain_log_ticks
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import (
    MODEL,
    ONE_COLUMN,
    add_note,
    dataset_styles,
    legend_above,
    new_figure,
    styled,
)

LEAST_SHARE: Final = 0.05
"""Data sets that never hold this share are drawn together, as others."""

OTHERS: Final = "0.55"
PRIOR: Final = "0.93"


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw the shares in the squared error of log f along log N, stacked, and the error below.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    table = inputs.tables["information_by_column"]
    log_nhi = np.asarray(table["log_nhi"], float)
    styles = dataset_styles(inputs.fit)
    figure = new_figure(inputs, ONE_COLUMN, 3.6)
    axes, lower = figure.subplots(2, sharex=True, height_ratios=[2.0, 1.0])
    shares, labels, colours = [], [], []
    others = np.zeros(len(table))
    for name, style in styles.items():
        share = np.asarray(table[f"share_{name}"], float)
        if share.max() < LEAST_SHARE:
            others = others + share
            continue
        shares.append(share)
        labels.append(style.label)
        colours.append(style.colour)
    if others.any():
        shares.append(others)
        labels.append("other data sets")
        colours.append(OTHERS)
    shares.append(np.asarray(table["share_prior"], float))
    stack = axes.stackplot(
        log_nhi, shares, labels=[*labels, "prior"], colors=[*colours, PRIOR], linewidth=0.3
    )
    # Colours come round again after some data sets: hatches tell the second round apart.
    for i, area in enumerate(stack[:-1]):
        area.set_edgecolor("white")
        if colours[i] in colours[:i]:
            area.set_hatch("///")
    stack[-1].set_hatch("...")
    stack[-1].set_edgecolor("0.7")
    axes.set_ylim(0.0, 1.0)
    axes.set_ylabel(r"share in the variance of $\log f$")
    for name, line, label in (("sigma", "-", "draws"), ("sigma_linear", ":", "linear")):
        lower.plot(log_nhi, table[name], line, color=MODEL, linewidth=1.0, label=label)
    lower.set_yscale("log")
    plain_log_ticks(lower.yaxis)
    lower.set_ylabel("error [dex]")
    lower.legend(loc="upper left")
    column_axis(lower, inputs)
    mark_classes(lower)
    legend_above(figure, axes)
    z = inputs.fit.setting.distribution.reference_redshift
    add_note(
        figure,
        [
            rf"Of $\log f$ at $z = {z:g}$, from Fisher information at the posterior mean. Where "
            "the prior fills the panel, the band is an assumption.",
        ],
    )
    return figure
