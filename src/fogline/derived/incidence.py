"""Incidence ℓ(X) and ℓ(z) of the classes of optically thick absorbers."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import log_nhi_at_tau
from fogline.derived.base import DLA_LOG_NHI, SUB_DLA_LOG_NHI, Draws
from fogline.tables import Curve

Array = NDArray[np.float64]


class IncidenceTable:
    """ℓ(X) and ℓ(z) of LLS (τ ≥ 1, τ ≥ 2), sub-DLAs and DLAs against z."""

    name = "incidence"
    definition = (
        "lx: absorbers per unit absorption distance; lz: per unit redshift (lx times dX/dz). "
        "lls_tau1, lls_tau2: all columns with tau_912 of at least 1 or 2; sub_dla: log N 19.0 to "
        "20.3; dla: from 20.3. Upper end of each open range: the last pivot."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Array, str, str]]:
        """Return redshift."""
        return {"z": (draws.z, "", "redshift")}

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return ℓ(X), then ℓ(z), of every class."""
        classes = {
            "lls_tau1": (float(log_nhi_at_tau(1.0)), np.inf),
            "lls_tau2": (float(log_nhi_at_tau(2.0)), np.inf),
            "sub_dla": (SUB_DLA_LOG_NHI, DLA_LOG_NHI),
            "dla": (DLA_LOG_NHI, np.inf),
        }
        lx = {name: draws.column_integral(lo, hi) for name, (lo, hi) in classes.items()}
        dx_dz = draws.setting.cosmology.dx_dz(draws.z)
        curves = {f"lx_{n}": Curve(v, "", f"l(X) of {n}") for n, v in lx.items()}
        return curves | {f"lz_{n}": Curve(v * dx_dz, "", f"l(z) of {n}") for n, v in lx.items()}
