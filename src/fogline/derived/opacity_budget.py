"""Which columns absorb at the Lyman limit, and which hold the H I mass."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import photoionization_cross_section
from fogline.cosmology import C_KM_S
from fogline.derived.base import Draws
from fogline.distribution import LN10
from fogline.quadrature import column_nodes
from fogline.tables import Curve

Array = NDArray[np.float64]


class OpacityBudgetTable:
    """Lyman-limit opacity and H I mass per dex of column density."""

    name = "opacity_budget"
    definition = (
        "opacity_per_dex: contribution of each dex of column to the opacity at 912 A (inverse "
        "proper length); opacity_share, mass_share: the same and the H I mass per dex over their "
        "totals between the first and the last pivot; cumulative: what is below a column."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Array, str, str]]:
        """Return redshift and log N."""
        z, log_nhi = draws.column_keys()
        return {
            "z": (z, "", "redshift"),
            "log_nhi": (log_nhi, "", "log10 of the column density in cm^-2"),
        }

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return opacity per dex and both shares."""
        z, log_nhi = draws.column_keys()
        per_dex = draws.f(log_nhi, z) * LN10 * 10.0**log_nhi
        cosmology = draws.setting.cosmology
        # Proper path: dl = c dz / [(1+z) H].
        per_mpc = cosmology.dx_dz(z) * (1.0 + z) * cosmology.hubble(z) / C_KM_S
        opacity, mass = absorbed_share(log_nhi), 10.0**log_nhi
        return {
            "opacity_per_dex": Curve(
                per_dex * opacity * per_mpc, "1 / Mpc", "opacity at 912 A per dex of column"
            ),
            "opacity_share": Curve(
                per_dex * opacity / _totals(draws, absorbed_share),
                "",
                "share of the opacity at 912 A per dex of column",
            ),
            "opacity_cumulative": Curve(
                cumulative(draws, absorbed_share), "", "share of the opacity up to that column"
            ),
            "mass_cumulative": Curve(
                cumulative(draws, lambda column: 10.0**column),
                "",
                "share of the H I mass up to that column",
            ),
            "mass_share": Curve(
                per_dex * mass / _totals(draws, lambda column: 10.0**column),
                "",
                "share of the H I mass per dex of column",
            ),
        }


def absorbed_share(log_nhi: Array) -> Array:
    """Return 1 − exp(−N σ_912), the share of photons at 912 Å that an absorber takes out."""
    return np.asarray(-np.expm1(-(10.0**log_nhi) * photoionization_cross_section(1.0)))


def cumulative(draws: Draws, kernel: Callable[[Array], Array]) -> Array:
    """Return the share of ∫ f K dN that lies below every column, shape (n_draws, n_rows)."""
    grid = draws.column_grid()
    kinks = draws.setting.distribution.kinks
    pieces = [column_nodes(lo, hi, kinks) for lo, hi in pairwise(grid)]
    log_nhi, d_nhi = (np.concatenate(part) for part in zip(*pieces, strict=True))
    starts = np.cumsum([0, *(len(nodes) for nodes, _ in pieces[:-1])])
    weights = kernel(log_nhi) * d_nhi
    shares = []
    for z in draws.derive.column_redshifts:
        below = np.cumsum(np.add.reduceat(draws.f(log_nhi, z) * weights, starts, axis=1), axis=1)
        shares.append(np.pad(below, ((0, 0), (1, 0))) / below[:, -1:])
    return np.concatenate(shares, axis=1)


def _totals(draws: Draws, kernel: Callable[[Array], Array]) -> Array:
    """Return ∫ f K dN over all pivots, repeated along the columns, shape (n_draws, n_rows)."""
    log_nhi, d_nhi = column_nodes(*draws.setting.column_range, draws.setting.distribution.kinks)
    weights = kernel(log_nhi) * d_nhi
    totals = [draws.f(log_nhi, z) @ weights for z in draws.derive.column_redshifts]
    return np.repeat(np.stack(totals, axis=1), len(draws.column_grid()), axis=1)
