"""Looks that all figures share: sizes, fonts, colours, one symbol a data set.

Colours are those of Okabe & Ito (2008, "Color universal design"), which readers with any common
colour vision tell apart. Model curves are grey (a second one blue-grey), so that colour always
means a data set.
"""

from __future__ import annotations

import textwrap
from collections.abc import Callable
from dataclasses import dataclass
from functools import wraps
from typing import Any, Concatenate, Final, ParamSpec

from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.style import context

from fogline.figures.inputs import FigureInputs
from fogline.response_file import Fit

P = ParamSpec("P")

ONE_COLUMN: Final = 3.4
"""Width of a journal's column [in]."""

TWO_COLUMNS: Final = 7.0
"""Width of a journal's page [in]."""

LEGEND_LINE: Final = 0.145
"""Height of one line of a legend [in]."""

NOTE_LINE: Final = 0.11
"""Height of one line of small print [in]."""

SMALL: Final = 7.0
"""Smallest print [pt]."""

STYLE: Final[dict[str, Any]] = {
    "font.family": "STIXGeneral",
    "mathtext.fontset": "stix",
    "font.size": 8.5,
    "axes.labelsize": 9.0,
    "axes.titlesize": 8.5,
    "xtick.labelsize": 8.0,
    "ytick.labelsize": 8.0,
    "legend.fontsize": 7.5,
    "figure.titlesize": 8.5,
    "figure.labelsize": SMALL,
    "legend.frameon": False,
    "legend.handlelength": 1.6,
    "legend.handletextpad": 0.5,
    "legend.labelspacing": 0.25,
    "legend.columnspacing": 1.0,
    "legend.borderaxespad": 0.4,
    "axes.linewidth": 0.6,
    "lines.linewidth": 1.1,
    "lines.markersize": 4.0,
    "patch.linewidth": 0.6,
    "hatch.linewidth": 0.4,
    "errorbar.capsize": 0.0,
    "xtick.direction": "in",
    "ytick.direction": "in",
    "xtick.top": True,
    "ytick.right": True,
    "xtick.minor.visible": True,
    "ytick.minor.visible": True,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.minor.width": 0.4,
    "ytick.minor.width": 0.4,
    "xtick.major.size": 3.5,
    "ytick.major.size": 3.5,
    "xtick.minor.size": 2.0,
    "ytick.minor.size": 2.0,
    "figure.constrained_layout.h_pad": 0.02,
    "figure.constrained_layout.w_pad": 0.02,
    "figure.constrained_layout.hspace": 0.0,
    "figure.constrained_layout.wspace": 0.03,
    "pdf.fonttype": 42,
    "savefig.dpi": 200,
}
"""Matplotlib settings of every figure; applied while drawing and saving, never globally."""

COLOURS: Final = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#56B4E9", "#000000")
"""Colours of data sets, in their order."""

MARKERS: Final = ("o", "s", "^", "D", "v", "p", "<", "h", ">", "d", "*")
"""Markers of data sets; as many as make every pair of colour and marker unique for 77 sets."""

MODEL: Final = "#3c3c3c"
"""Colour of the model's curve."""

SECOND_MODEL: Final = "#5b7fa6"
"""Colour of a second curve in the same panel."""

WARNING: Final = "#c00000"
"""Colour of what a reader must not overlook."""


@dataclass(frozen=True)
class DataStyle:
    """How one data set looks in every figure.

    Parameters
    ----------
    colour : str
    marker : str
    label : str
        Its name in legends.
    """

    colour: str
    marker: str
    label: str


def readable(name: str) -> str:
    """Return a data set's name as legends show it."""
    return name.replace("_", " ")


def dataset_styles(fit: Fit) -> dict[str, DataStyle]:
    """Return the style of every data set by its name, from the order in the analysis."""
    return {
        data.name: DataStyle(
            COLOURS[i % len(COLOURS)], MARKERS[i % len(MARKERS)], readable(data.name)
        )
        for i, data in enumerate(fit.response.datasets)
    }


def styled(
    draw: Callable[Concatenate[Any, P], Figure],
) -> Callable[Concatenate[Any, P], Figure]:
    """Make a function draw with `STYLE`, whatever the caller's settings are."""

    @wraps(draw)
    def drawn(inputs: Any, *args: P.args, **kwargs: P.kwargs) -> Figure:
        with context(STYLE, after_reset=True):
            return draw(inputs, *args, **kwargs)

    return drawn


def new_figure(inputs: FigureInputs, width: float, height: float) -> Figure:
    """Return an empty figure that says so where the chains have not converged.

    Parameters
    ----------
    inputs : FigureInputs
    width, height : float [in]
    """
    figure = Figure(figsize=(width, height), layout="constrained")
    if not inputs.converged:
        # At the right: a legend above the panels begins at the left of the same line.
        figure.suptitle("not converged", x=0.98, ha="right", color=WARNING, weight="bold")
    return figure


def legend_above(figure: Figure, *panels: Axes) -> None:
    """Put the legend of some panels above them, where it hides no data; the figure grows by it.

    Parameters
    ----------
    figure : Figure
    *panels : Axes
        The same label is listed once.
    """
    entries: dict[str, Artist] = {}
    for axes in panels:
        for handle, label in zip(*axes.get_legend_handles_labels(), strict=True):
            entries.setdefault(label, handle)
    figure.set_figheight(figure.get_figheight() + LEGEND_LINE * len(entries))
    figure.legend(list(entries.values()), list(entries), loc="outside upper left")


def add_note(figure: Figure, lines: list[str]) -> None:
    """Write small print below a figure, wrapped to its width; the figure grows by it."""
    per_inch = 19  # characters of `SMALL` print
    n_characters = int(per_inch * figure.get_figwidth())
    wrapped = [part for line in lines for part in textwrap.wrap(line, n_characters)]
    if wrapped:
        figure.set_figheight(figure.get_figheight() + NOTE_LINE * len(wrapped))
        figure.supxlabel("\n".join(wrapped), x=0.02, ha="left", color="0.25", linespacing=1.1)
