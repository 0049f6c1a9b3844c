"""Cosmic density of neutral hydrogen: ρ_HI, Ω_HI or Ω_gas, in a stated column range.

    ρ_HI = (m_H H0 / c) ∫ N f dN  (comoving),    Ω_HI = ρ_HI / ρ_crit(z=0),    Ω_gas = Ω_HI · μ

H0, ρ_crit and dX/dz are those of the file's cosmology; the helium factor μ is the file's meta,
since authors use 1.3 or 1/0.76. Without ``log_nhi_max`` the integral ends at the last pivot.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np
from astropy import units
from numpy.typing import NDArray

from fogline.constants import C_CGS, M_HYDROGEN, MPC_CM, SOLAR_MASS
from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.quadrature import column_nodes
from fogline.quantities.base import (
    Block,
    Setting,
    Term,
    assemble,
    path_ratio,
    row_redshifts,
)
from fogline.quantities.lls_incidence import column_limits
from fogline.quantities.spec import FileSpec, MetaKey, ValueColumn, column_key

Array = NDArray[np.float64]

SPEC: Final = FileSpec(
    quantity="hi_density",
    description="Cosmic density of neutral hydrogen.",
    meta=(
        MetaKey(
            "form",
            "choice",
            "rho_hi (comoving mass density), omega_hi (in units of today's critical density), "
            "omega_gas (omega_hi times helium_factor)",
            choices=("rho_hi", "omega_hi", "omega_gas"),
            example="omega_hi",
        ),
        MetaKey(
            "helium_factor",
            "number",
            "mass of all gas over that of its hydrogen (form omega_gas only)",
            minimum=1.0,
            maximum=2.0,
            required_when={"form": ("omega_gas",)},
            example=1.3,
        ),
        column_key("min", "lowest column counted", True, 20.3),
        column_key("max", "highest column counted", False, 22.0),
    ),
    values={
        "rho_hi": ValueColumn(
            units=("Msun / Mpc3",),
            example=9.0e7,
            example_err=1.0e7,
            example_unit="Msun / Mpc3",
            help="comoving mass density",
        ),
        "omega_hi": ValueColumn(
            maximum=1.0, example=6.6e-4, example_err=0.7e-4, help="density over the critical one"
        ),
        "omega_gas": ValueColumn(
            maximum=1.0, example=8.6e-4, example_err=0.9e-4, help="density over the critical one"
        ),
    },
    form_key="form",
    cosmology_when={},
)


def mass_per_moment(cosmology: Cosmology) -> float:
    """Return ρ_HI / ∫ N f dN = m_H H0 / c [M_sun Mpc^-3 cm^2]."""
    hubble_per_s = cosmology.H0 * 1e5 / MPC_CM
    return M_HYDROGEN * hubble_per_s / C_CGS / SOLAR_MASS * MPC_CM**3


class HiDensity:
    """Density of neutral hydrogen locked in absorbers of a column range."""

    spec = SPEC
    label = r"$\rho_\mathrm{HI}$ [$M_\odot\,\mathrm{Mpc}^{-3}$]"

    def respond(self, data: DataSet, setting: Setting) -> Block:
        """Return one raw prediction a row, in the file's form and unit."""
        log_nhi, d_nhi = column_nodes(*column_limits(data, setting), setting.distribution.kinks)
        moment = self._scale(data, setting) * 10.0**log_nhi * d_nhi
        terms = [
            (row, Term(z, log_nhi, weight * path_ratio(data, setting, z) * moment))
            for row, z, weight in row_redshifts(data, setting)
        ]
        return assemble(terms, data.n_rows)

    def reduce(self, data: DataSet, raw: Array, constants: Mapping[str, Array]) -> Array:
        """Return the raw predictions: they are those of the rows."""
        return raw

    @staticmethod
    def _scale(data: DataSet, setting: Setting) -> float:
        cosmology = data.cosmology or setting.cosmology
        density = mass_per_moment(cosmology)
        form = data.meta["form"]
        if form == "rho_hi":
            return float((density * units.Msun / units.Mpc**3).to_value(data.unit))
        omega = density / cosmology.critical_density
        return omega * float(data.meta["helium_factor"]) if form == "omega_gas" else omega
