"""Figures. A new one is one module and one line of `FIGURES`."""

from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any, Final

from matplotlib.figure import Figure
from matplotlib.style import context

from fogline.figures import (
    column_distribution,
    convergence,
    corner_plot,
    depth_path,
    escape_correction,
    hi_density,
    information,
    ionizing_background,
    lls_incidence,
    lya_opacity,
    mean_free_path,
    misfit,
    opacity_budget,
    prior_posterior,
    pulls,
    transmission,
)
from fogline.figures.comparison import draw_comparison
from fogline.figures.forecast import draw_forecast
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import STYLE, dataset_styles
from fogline.tables import write_whole

FIGURES: Final[dict[str, Callable[[FigureInputs], Figure]]] = {
    "column_distribution": column_distribution.draw,
    "lya_opacity": lya_opacity.draw,
    "lls_incidence": lls_incidence.draw,
    "mean_free_path": mean_free_path.draw,
    "hi_density": hi_density.draw,
    "opacity_budget": opacity_budget.draw,
    "transmission": transmission.draw,
    "escape_correction": escape_correction.draw,
    "depth_path": depth_path.draw,
    "ionizing_background": ionizing_background.draw,
    "corner": corner_plot.draw,
    "pulls": pulls.draw,
    "misfit": misfit.draw,
    "information": information.draw,
    "convergence": convergence.draw,
    "prior_posterior": prior_posterior.draw,
}
"""What draws each figure, by the stem of its files."""

METADATA: Final[dict[str, dict[str, Any]]] = {"pdf": {"CreationDate": None}, "png": {}}
"""Nothing that changes from one run to the next: the same figure gives the same file."""


def save(figure: Figure, path: str | Path) -> None:
    """Write a figure as PDF and PNG.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    path : path-like
        Without suffix.
    """
    with context(STYLE, after_reset=True):
        # Positions are found once, not anew for each form: that takes as long as the drawing.
        figure.draw_without_rendering()
        figure.set_layout_engine("none")
        for form, metadata in METADATA.items():
            write_whole(f"{path}.{form}", partial(figure.savefig, format=form, metadata=metadata))


__all__ = [
    "FIGURES",
    "FigureInputs",
    "dataset_styles",
    "draw_comparison",
    "draw_forecast",
    "save",
]
