"""Cosmic density of H I and the shares of the classes of absorbers."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from fogline.derived.base import DLA_LOG_NHI, LLS_LOG_NHI, SUB_DLA_LOG_NHI, Draws
from fogline.dust import DustModel
from fogline.priors import positive_map
from fogline.quadrature import column_nodes
from fogline.quantities.hi_density import mass_per_moment
from fogline.tables import Curve

Array = NDArray[np.float64]

STREAM = 1_000_039
"""Spawn key of the random stream of the dust's optical depth."""


class HiDensityTable:
    """ρ_HI, Ω_HI and mass shares against z."""

    name = "hi_density"
    definition = (
        "rho_hi = (m_H H0 / c) times the integral of N f dN over all pivots, comoving; omega_hi = "
        "rho_hi over the critical density today; no helium. Shares of the H I mass: dla from log "
        "N 20.3, sub_dla 19.0 to 20.3, lls 17.2 to 19.0, forest below 17.2. Mass above the last "
        "pivot is not counted, and above the highest measured column the band is prior-driven. "
        "omega_gas: omega_hi times the helium factor in derive. Where derive.dust states a model: "
        "dust_factor, by which DLAs hidden behind dust raise rho_hi, and rho_hi_dust, with it; "
        "a model, not data."
    )

    def note(self, draws: Draws) -> str:
        """Return in words how much of the error is owed to columns that no data counted."""
        if draws.highest_column is None:
            return "no data set counts columns in bins: the high-column end is the prior's"
        share = variance_above(draws, draws.highest_column)
        return (
            f"{100 * share:.0f}% of the posterior variance of rho_hi lies above log N = "
            f"{draws.highest_column:g}, the highest column that was counted: it is prior-driven"
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
        omega_gas = draws.derive.helium_factor * rho / cosmology.critical_density
        curves["omega_gas"] = Curve(omega_gas, "", "omega_hi times the helium factor")
        if draws.dust is not None:
            factor = dust_factor(draws, draws.dust)
            curves["dust_factor"] = Curve(factor, "", "rho_hi with over without hidden DLAs")
            label = "comoving density of H I, hidden DLAs added (model)"
            curves["rho_hi_dust"] = Curve(rho * factor, "Msun / Mpc3", label)
        return curves | {
            f"share_{name}": Curve(moment / total, "", f"share of the H I mass in {name}")
            for name, moment in moments.items()
        }


def variance_above(draws: Draws, log_nhi: float) -> float:
    """Return the share of the variance of ρ_HI that columns above a limit bring.

    cov(part above, total) / var(total), by which the shares of the parts add up to one; the mean
    over the redshifts of the table.

    Parameters
    ----------
    draws : Draws
    log_nhi : float [dex of cm^-2]
    """

    def column(x: Array) -> Array:
        return np.asarray(10.0**x)

    above = draws.column_integral(log_nhi, np.inf, column)
    total = above + draws.column_integral(-np.inf, log_nhi, column)
    if len(total) < 2:
        return float("nan")
    covariance = ((above - above.mean(axis=0)) * (total - total.mean(axis=0))).mean(axis=0)
    return float(np.mean(covariance / total.var(axis=0)))


def dust_factor(draws: Draws, dust: DustModel) -> Array:
    """Return ρ_HI with over without the DLAs that dust hides, shape (n_draws, n_z)."""
    seed = np.random.SeedSequence(draws.seed, spawn_key=(STREAM,))
    x = np.random.default_rng(seed).standard_normal(len(draws.theta))
    optical_depth = positive_map(dust.optical_depth)(x)
    lo, hi = draws.clip(DLA_LOG_NHI, np.inf)
    log_nhi, d_nhi = column_nodes(lo, hi, draws.setting.distribution.kinks)
    mass = 10.0**log_nhi * d_nhi
    hidden = mass * (1.0 / dust.kept(log_nhi, optical_depth) - 1.0)
    more = np.stack([(draws.f(log_nhi, z) * hidden).sum(axis=1) for z in draws.z], axis=1)
    total = draws.column_integral(-np.inf, np.inf, lambda x: 10.0**x)
    return np.asarray(1.0 + more / total)
