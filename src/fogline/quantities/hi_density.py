"""Cosmic density of neutral hydrogen: ρ_HI, Ω_HI or Ω_gas, in a stated column range.

    ρ_HI = (m_H H0 / c) ∫ N f dN  (comoving),    Ω_HI = ρ_HI / ρ_crit(z=0),    Ω_gas = Ω_HI · μ

H0, ρ_crit and dX/dz are those of the file's cosmology; the helium factor μ is the file's meta, since
authors use 1.3 or 1/0.76. Without ``log_nhi_max`` the integral ends at the last pivot.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from astropy import units
from numpy.typing import NDArray

from fogline.constants import C_CGS, M_HYDROGEN, MPC_CM, SOLAR_MASS
from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.quadrature import column_nodes
from fogline.quantities import file_specs
from fogline.quantities.base import (
    Block,
    Setting,
    Term,
    assemble,
    path_ratio,
    row_redshifts,
)
from fogline.quantities.lls_incidence import column_limits

Array = NDArray[np.float64]


def mass_per_moment(cosmology: Cosmology) -> float:
    """Return ρ_HI / ∫ N f dN = m_H H0 / c [M_sun Mpc^-3 cm^2]."""
    hubble_per_s = cosmology.H0 * 1e5 / MPC_CM
    return M_HYDROGEN * hubble_per_s / C_CGS / SOLAR_MASS * MPC_CM**3


class HiDensity:
    """Density of neutral hydrogen locked in absorbers of a column range."""

    spec = file_specs.HI_DENSITY
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
