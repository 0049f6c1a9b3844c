"""Mean free path at the Lyman limit against redshift, both definitions."""

from __future__ import annotations

from typing import Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.figures.axis import plain_log_ticks, redshift_axis
from fogline.figures.bands import OUTER_NOTE, Band, draw_band, table_band
from fogline.figures.conventions import joined, other_cosmology
from fogline.figures.data_points import ToDisplay
from fogline.figures.inputs import FigureInputs
from fogline.figures.shown import Shown, convention_note, draw_along_z
from fogline.figures.style import (
    MODEL,
    ONE_COLUMN,
    SECOND_MODEL,
    add_note,
    legend_above,
    new_figure,
    readable,
    styled,
)
from fogline.quantities.mean_free_path import length_unit

DEFINITIONS: Final = {
    "local": (MODEL, "-", "local: inverse opacity", True),
    "unit_depth": (SECOND_MODEL, "--", "unit depth: flux falls to $1/e$", False),
}
"""Colour and line of the curve, label, and whether symbols are filled, by definition."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw the proper mean free path; filled symbols are local, open ones unit depth.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    shown = [_shown(data, inputs) for data in inputs.of_quantity("mean_free_path")]
    figure = new_figure(inputs, ONE_COLUMN, 2.6)
    axes = figure.subplots()
    axes.set_yscale("log")
    for definition, (colour, line, label, _) in DEFINITIONS.items():
        band = table_band(inputs.tables["mean_free_path"], "z", definition)
        draw_band(axes, band, colour=colour, line=line, label=label, outer="lines")
    draw_along_z(axes, inputs, shown)
    axes.set_ylabel(r"mean free path at 912 Å [proper Mpc]")
    redshift_axis(axes, inputs, inputs.of_quantity("mean_free_path"))
    _limit_axis(axes, inputs, shown)
    plain_log_ticks(axes.yaxis)
    legend_above(figure, axes)
    add_note(figure, [OUTER_NOTE, *_reach_note(inputs), *convention_note(shown)])
    return figure


def _shown(data: DataSet, inputs: FigureInputs) -> Shown:
    *_, filled = DEFINITIONS[data.meta["definition"]]
    setting = inputs.fit.setting
    frame = "" if data.meta["frame"] == "proper" else "comoving$/(1+z)$"
    return Shown(
        data,
        to_mpc(data, data.cosmology or setting.cosmology),
        joined((frame, other_cosmology(data, setting))),
        filled=filled,
        note=readable(data.meta["definition"]),
    )


def to_mpc(data: DataSet, cosmology: Cosmology) -> ToDisplay:
    """Return the factor from a file's lengths to proper Mpc, with the file's own h.

    Comoving lengths are divided by 1 + z of their row, which makes local ones proper. Over a unit
    depth the factor falls towards the observer: such a number is to be held against its own
    prediction, not against the curve.
    """
    factor = np.full(data.n_rows, 1.0 / length_unit(data.unit, cosmology))
    if data.meta["frame"] == "comoving":
        factor /= 1.0 + data.z
    return lambda length: length * factor


def _reach_note(inputs: FigureInputs) -> list[str]:
    upper = np.asarray(inputs.tables["mean_free_path"]["unit_depth_hi95"], float)
    if np.isfinite(upper).all():
        return []
    return ["Running off the top: beyond reach, the depth stays below 1 down to $z = 0$."]


def _limit_axis(axes: Axes, inputs: FigureInputs, shown: list[Shown]) -> None:
    """Fit the axis to what is finite: beyond reach a band runs off the top."""
    table = inputs.tables["mean_free_path"]
    ends = [_finite_ends(table_band(table, "z", name)) for name in DEFINITIONS]
    values = [item.to_display(item.data.observed) for item in shown]
    ends += [(float(v.min()), float(v.max())) for v in values]
    axes.set_ylim(0.75 * min(lo for lo, _ in ends), 1.4 * max(hi for _, hi in ends))


def _finite_ends(band: Band) -> tuple[float, float]:
    return float(band.lo95.min()), float(band.hi68[np.isfinite(band.hi68)].max())
