"""The fitted f(N, X, z) itself."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from fogline.derived.base import Draws
from fogline.tables import Curve

Array = NDArray[np.float64]


class ColumnDistributionTable:
    """log10 f against log N at the column redshifts."""

    name = "column_distribution"
    definition = (
        "f(N_HI, X, z): absorbers per unit column and unit absorption distance, in the cosmology "
        "of the results. Where no data constrain a column range the band is that of the prior."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Array, str, str]]:
        """Return redshift and log N."""
        z, log_nhi = draws.column_keys()
        return {
            "z": (z, "", "redshift"),
            "log_nhi": (log_nhi, "", "log10 of the column density in cm^-2"),
        }

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return log10 f."""
        z, log_nhi = draws.column_keys()
        values = draws.setting.distribution.log_f(draws.theta, log_nhi, z)
        return {"log_f": Curve(np.asarray(values), "", "log10 of f(N_HI, X, z) in cm^2")}
