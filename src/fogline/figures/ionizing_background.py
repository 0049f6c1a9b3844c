"""Free path against the horizon, and sources or background that go with it."""

from __future__ import annotations

from typing import Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fogline.figures.axis import plain_log_ticks
from fogline.figures.bands import draw_band, table_band
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import ONE_COLUMN, add_note, new_figure, styled
from fogline.local_sources import VALID_PATH

SHOWN: Final = {
    "photon_rate": (
        1e50,
        r"$\dot n_\mathrm{ion}$ [$10^{50}\,\mathrm{s}^{-1}\,\mathrm{Mpc}^{-3}$]",
    ),
    "gamma_hi": (1e-12, r"$\Gamma_\mathrm{HI}$ [$10^{-12}\,\mathrm{s}^{-1}$]"),
}
"""What stands below the free path, whichever the table has: unit and label."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw the free path over the horizon, and photon production or Γ where they follow.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    table = inputs.tables["ionizing_background"]
    found = [name for name in SHOWN if f"{name}_median" in table.colnames]
    figure = new_figure(inputs, ONE_COLUMN, 3.4 if found else 2.4)
    panels = figure.subplots(1 + len(found), sharex=True, squeeze=False)[:, 0]
    prefix = "path_over_horizon" if found else ""
    draw_band(panels[0], table_band(table, "z", prefix))
    panels[0].axhline(VALID_PATH, color="0.5", linewidth=0.6, linestyle="--")
    panels[0].set_yscale("log")
    plain_log_ticks(panels[0].yaxis)
    panels[0].set_ylabel(r"$\lambda_\mathrm{mfp}^{912}\,H/c$")
    for axes, name in zip(panels[1:], found, strict=True):
        unit, label = SHOWN[name]
        draw_band(axes, table_band(table, "z", name, scale=1.0 / unit))
        axes.set_ylabel(label)
        axes.set_ylim(bottom=0.0)
    for axes in panels:
        _shade_invalid(axes, np.asarray(table["z"], float), np.asarray(table["valid"], int))
    panels[-1].set_xlabel("redshift $z$")
    panels[-1].margins(x=0.0)
    figure.align_ylabels()
    notes = ["Bands: 68%, 95%. Dashed: a tenth of the horizon; hatched: above it, where the"]
    notes[0] += " local-source relation only indicates."
    if not found:
        notes.append("No background or emissivity is configured (derive.background).")
    add_note(figure, notes)
    return figure


def _shade_invalid(axes: Axes, z: np.ndarray, valid: np.ndarray) -> None:
    bad = z[valid == 0]
    if len(bad):
        axes.axvspan(bad.min(), bad.max(), color="0.8", alpha=0.4, hatch="///", linewidth=0.0)
