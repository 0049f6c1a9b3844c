"""Cosmic density of H I and the shares of the classes of absorbers."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from fogline.derived.base import DLA_LOG_NHI, LLS_LOG_NHI, SUB_DLA_LOG_NHI, Draws
from fogline.quantities.hi_density import mass_per_moment
from fogline.tables import Curve

Array = NDArray[np.float64]


class HiDensityTable:
    """ρ_HI, Ω_HI and mass shares against z."""

    name = "hi_density"
    definition = (
        "rho_hi = (m_H H0 / c) times the integral of N f dN over all pivots, comoving; omega_hi = "
        "rho_hi over the critical density today; no helium. Shares of the H I mass: dla from log "
        "N 20.3, sub_dla 19.0 to 20.3, lls 17.2 to 19.0, forest below 17.2. Mass above the last "
        "pivot is not counted, and above the highest measured column the band is prior-driven."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Array, str, str]]:
        """Return redshift."""
        return {"z": (draws.z, "", "redshift")}

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return ρ_HI, Ω_HI and shares."""
        edges = {
            "dla": (DLA_LOG_NHI, np.inf),
            "sub_dla": (SUB_DLA_LOG_NHI, DLA_LOG_NHI),
            "lls": (LLS_LOG_NHI, SUB_DLA_LOG_NHI),
            "forest": (-np.inf, LLS_LOG_NHI),
        }
        moments = {
            name: draws.column_integral(lo, hi, kernel=lambda log_nhi: 10.0**log_nhi)
            for name, (lo, hi) in edges.items()
        }
        total = np.sum(list(moments.values()), axis=0)
        cosmology = draws.setting.cosmology
        rho = mass_per_moment(cosmology) * total
        curves = {
            "rho_hi": Curve(rho, "Msun / Mpc3", "comoving density of H I"),
            "omega_hi": Curve(rho / cosmology.critical_density, "", "rho_hi over rho_crit(z=0)"),
        }
        return curves | {
            f"share_{name}": Curve(moment / total, "", f"share of the H I mass in {name}")
            for name, moment in moments.items()
        }
