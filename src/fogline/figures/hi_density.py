"""Cosmic density of H I against redshift, and the share held by DLAs."""

from __future__ import annotations

from typing import Final

import numpy as np
from astropy import units
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.figures.axis import redshift_axis
from fogline.figures.bands import draw_band, table_band
from fogline.figures.conventions import joined, other_columns, other_cosmology
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
    styled,
)

UNIT: Final = 1e8
"""The axis is in this many solar masses per cubic Mpc."""

FORM_NOTES: Final = {
    "rho_hi": "",
    "omega_hi": r"$\Omega_\mathrm{HI}\,\rho_\mathrm{c}$",
    "omega_gas": r"$\Omega_\mathrm{gas}\,\rho_\mathrm{c}/\mu$",
}
"""How a label says that the file states something else than a mass density."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw ρ_HI with its bands and data, and the shares of DLAs and sub-DLAs below.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    setting = inputs.fit.setting
    shown = [
        Shown(
            data,
            to_density(data, data.cosmology or setting.cosmology),
            joined((other_columns(data, setting, -np.inf, np.inf), other_cosmology(data, setting))),
            note=FORM_NOTES[data.meta["form"]],
        )
        for data in inputs.of_quantity("hi_density")
    ]
    figure = new_figure(inputs, ONE_COLUMN, 3.7)
    density, shares = figure.subplots(2, sharex=True, height_ratios=[2.2, 1.0])
    _draw_density(density, inputs, shown)
    _draw_shares(shares, inputs)
    redshift_axis(shares, inputs, inputs.of_quantity("hi_density"))
    legend_above(figure, density)
    figure.align_ylabels()
    add_note(figure, convention_note(shown))
    return figure


def _draw_density(axes: Axes, inputs: FigureInputs, shown: list[Shown]) -> None:
    lo, hi = inputs.fit.setting.column_range
    band = table_band(inputs.tables["hi_density"], "z", "rho_hi", scale=1.0 / UNIT)
    draw_band(axes, band, label=rf"fit, $\log N = {lo:g}$–${hi:g}$ (68%, 95%)")
    draw_along_z(axes, inputs, shown)
    axes.set_ylabel(r"$\rho_\mathrm{HI}$ [$10^8\,M_\odot\,\mathrm{Mpc}^{-3}$]")
    axes.set_ylim(bottom=0.0)


def _draw_shares(axes: Axes, inputs: FigureInputs) -> None:
    table = inputs.tables["hi_density"]
    for name, label, colour, line in (
        ("dla", "DLAs", MODEL, "-"),
        ("sub_dla", "sub-DLAs", SECOND_MODEL, "--"),
    ):
        band = table_band(table, "z", f"share_{name}")
        draw_band(axes, band, colour=colour, line=line, label=label)
    axes.set_ylabel(r"share of $\rho_\mathrm{HI}$")
    axes.set_ylim(0.0, 1.0)
    axes.set_yticks([0.0, 0.5, 1.0])
    axes.legend(loc="center left")


def to_density(data: DataSet, cosmology: Cosmology) -> ToDisplay:
    """Return the factor from a file's form to `UNIT` solar masses per cubic Mpc.

    Ω is multiplied by the critical density of the file's own H0, Ω_gas divided by the file's own
    helium factor; both are what the file's authors multiplied with.
    """
    if data.meta["form"] == "rho_hi":
        factor = float(units.Unit(data.unit).to("Msun / Mpc3")) / UNIT
    else:
        factor = cosmology.critical_density / UNIT
    if data.meta["form"] == "omega_gas":
        factor /= float(data.meta["helium_factor"])
    return lambda value: value * factor
