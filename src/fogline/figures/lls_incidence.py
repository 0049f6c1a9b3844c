"""Incidence of optically thick absorbers against redshift."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fogline.atomic import log_nhi_at_tau
from fogline.datasets import DataSet
from fogline.derived.base import DLA_LOG_NHI, SUB_DLA_LOG_NHI
from fogline.figures.axis import plain_log_ticks, redshift_axis
from fogline.figures.bands import OUTER_NOTE, draw_band, table_band
from fogline.figures.conventions import joined, other_columns, other_cosmology, same_columns
from fogline.figures.data_points import per_path
from fogline.figures.inputs import FigureInputs
from fogline.figures.shown import Shown, convention_note, draw_along_z
from fogline.figures.style import (
    MODEL,
    ONE_COLUMN,
    SECOND_MODEL,
    add_note,
    legend_above,
    new_figure,
    styled,
)

PATHS: Final = {
    "dz": ("lz", r"$\ell(z)$ [per unit $z$]"),
    "dX": ("lx", r"$\ell(X)$ [per unit $X$]"),
}
"""Prefix of the table's columns and axis label for each path."""


@dataclass(frozen=True)
class AbsorberClass:
    """A class of absorbers whose incidence the table holds."""

    name: str
    label: str
    lo: float
    hi: float
    colour: str
    line: str
    filled: bool


TAU_1, TAU_2 = float(log_nhi_at_tau(1.0)), float(log_nhi_at_tau(2.0))

CLASSES: Final = (
    AbsorberClass("lls_tau1", r"$\tau_{912} \geq 1$", TAU_1, np.inf, SECOND_MODEL, "--", False),
    AbsorberClass("lls_tau2", r"$\tau_{912} \geq 2$", TAU_2, np.inf, MODEL, "-", True),
    AbsorberClass("sub_dla", "sub-DLA", SUB_DLA_LOG_NHI, DLA_LOG_NHI, SECOND_MODEL, ":", False),
    AbsorberClass("dla", "DLA", DLA_LOG_NHI, np.inf, MODEL, "-.", True),
)
"""Open symbols go with the dashed curve of tau >= 1, filled ones with the solid curve."""

ALWAYS: Final = ("lls_tau1", "lls_tau2")
"""Classes whose curves are drawn with or without data."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw ℓ(z) of LLS, and ℓ(X) in a second panel where data are per absorption distance.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    by_path = {
        path: [d for d in inputs.of_quantity("lls_incidence") if d.meta["per"] == path]
        for path in PATHS
    }
    paths = [path for path in PATHS if by_path[path]] or ["dz"]
    figure = new_figure(inputs, ONE_COLUMN, 0.5 + 1.9 * len(paths))
    panels = figure.subplots(len(paths), sharex=True, squeeze=False)[:, 0]
    shown = []
    for axes, path in zip(panels, paths, strict=True):
        shown += _draw_panel(axes, inputs, path, by_path[path])
    redshift_axis(panels[-1], inputs, inputs.of_quantity("lls_incidence"))
    legend_above(figure, *panels)
    figure.align_ylabels()
    add_note(figure, [OUTER_NOTE, *convention_note(shown)])
    return figure


def _draw_panel(
    axes: Axes, inputs: FigureInputs, path: str, datasets: list[DataSet]
) -> list[Shown]:
    shown = [_shown(data, inputs) for data in datasets]
    present = {found.name for data in datasets if (found := _class_of(data, inputs))}
    drawn = [c for c in CLASSES if c.name in present or c.name in ALWAYS]
    prefix, label = PATHS[path]
    for c in drawn:
        band = table_band(inputs.tables["incidence"], "z", f"{prefix}_{c.name}")
        draw_band(axes, band, colour=c.colour, line=c.line, label=c.label, outer="lines")
    draw_along_z(axes, inputs, shown)
    axes.set_ylabel(label)
    # DLAs are ten times rarer than LLS: on a linear axis they would lie on its floor.
    if len(drawn) > len(ALWAYS):
        axes.set_yscale("log")
        plain_log_ticks(axes.yaxis)
    return shown


def _class_of(data: DataSet, inputs: FigureInputs) -> AbsorberClass | None:
    setting = inputs.fit.setting
    return next((c for c in CLASSES if same_columns(data, setting, c.lo, c.hi)), None)


def _shown(data: DataSet, inputs: FigureInputs) -> Shown:
    setting = inputs.fit.setting
    found = _class_of(data, inputs)
    difference = joined(
        (
            "" if found else other_columns(data, setting, CLASSES[1].lo, CLASSES[1].hi),
            other_cosmology(data, setting) if data.meta["per"] == "dX" else "",
        )
    )
    return Shown(
        data,
        per_path(data),
        difference,
        filled=found is None or found.filled,
        note=found.label if found else "",
    )
