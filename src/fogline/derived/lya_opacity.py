"""Lyα effective optical depth of the absorbers that are optically thin at the Lyman limit."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_ALPHA
from fogline.derived.base import LLS_LOG_NHI, Draws
from fogline.doppler import mean_equivalent_width
from fogline.tables import Curve

Array = NDArray[np.float64]


class LyaOpacityTable:
    """τ_eff of Lyα against z."""

    name = "lya_opacity"
    definition = (
        f"Ly-alpha effective optical depth of columns from the first pivot to log N = "
        f"{LLS_LOG_NHI}. A measurement that counts other columns does not compare directly; "
        "tables/predictive.ecsv compares each in its own convention."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Array, str, str]]:
        """Return redshift."""
        return {"z": (draws.z, "", "redshift")}

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return τ_eff."""

        def relative_width(log_nhi: Array) -> Array:
            width = mean_equivalent_width(log_nhi, draws.setting.doppler)
            return np.asarray(width / LYMAN_ALPHA.wavelength)

        summed = draws.column_integral(-np.inf, LLS_LOG_NHI, kernel=relative_width)
        tau = (1.0 + draws.z) * draws.setting.cosmology.dx_dz(draws.z) * summed
        return {"tau_eff": Curve(tau, "", "Ly-alpha effective optical depth")}
