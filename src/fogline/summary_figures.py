"""The figures of the summary page, with one sentence each."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Final

CAPTIONS: Final = {
    "column_distribution": "Column-density distribution f(N, X) with its 68% and 95% bands, the "
    "data in their own conventions and their residuals; shaded columns hold no measurement of f.",
    "misfit": "Every row against the fit without it, and the significance of four tests of every "
    "data set; red is flagged.",
    "tension": "Every data set against what all the others predict for it.",
    "pulls": "Pull of every row, (observed − predicted) / σ, with the p-value of its data set.",
    "information": "Which data set stands behind the error of log f at each column; where the "
    "prior fills the panel, the band is an assumption.",
    "prior_posterior": "Prior against posterior of every pivot and exponent; where the two agree, "
    "the data are silent.",
    "hi_density": "Comoving density of H I against redshift, and the share of damped absorbers.",
    "mean_free_path": "Local and unit-depth mean free paths against redshift; each data set "
    "belongs to one of them.",
    "transmission": "Mean transmission towards sources, Lyman lines and continuum together; no "
    "single sightline looks like it.",
    "convergence": "Traces, R-hat, effective sample sizes and autocorrelation times, from which "
    "the first line of the verdict comes.",
}
"""Figures in the order of the page."""

TITLES: Final = {"hi_density": "H I density", "prior_posterior": "Prior and posterior"}
"""Titles that are not the figure's name in words."""


@dataclass(frozen=True)
class Figure:
    """A figure that exists.

    Parameters
    ----------
    name : str
    path : str
        Relative to the folder of the analysis.
    caption : str
        One sentence.
    """

    name: str
    path: str
    caption: str

    @property
    def title(self) -> str:
        """Its name in words."""
        return TITLES.get(self.name, self.name.replace("_", " ").capitalize())


def figures_of(folder: str | Path) -> tuple[Figure, ...]:
    """Return the figures of `CAPTIONS` that an analysis has.

    Parameters
    ----------
    folder : path-like
        Of the analysis.
    """
    paths = {name: f"figures/{name}.png" for name in CAPTIONS}
    return tuple(
        Figure(name, paths[name], caption)
        for name, caption in CAPTIONS.items()
        if (Path(folder) / paths[name]).is_file()
    )
