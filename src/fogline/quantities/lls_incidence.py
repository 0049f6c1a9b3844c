"""Incidence of Lyman-limit systems: absorbers per unit path above an optical depth or column.

    ℓ(X) = ∫_{Nmin}^{Nmax} f dN,    ℓ(z) = ℓ(X) dX/dz,    n ~ Poisson(ℓ · path)

τ_912 ≥ τ_min means N ≥ τ_min / σ(ν_912). Without ``log_nhi_max`` the integral ends at the last
pivot, beyond which f is undefined. In a redshift bin ℓ is averaged over absorption distance.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import log_nhi_at_tau
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
from fogline.quantities.spec import PER, FileSpec, MetaKey, ValueColumn, column_key

Array = NDArray[np.float64]

SPEC: Final = FileSpec(
    quantity="lls_incidence",
    description="Number of absorbers above a column (or optical depth at 912 Å) per unit path.",
    meta=(
        PER,
        MetaKey(
            "tau_min",
            "number",
            "lowest optical depth at 912 Å counted",
            minimum=0.0,
            exclusive=True,
            required=False,
            example=2.0,
        ),
        column_key("min", "lowest column counted", False, 17.5),
        column_key("max", "highest column counted", False, 20.3),
    ),
    values={"": ValueColumn(example=1.6, example_err=0.2, help="absorbers per unit path")},
    counts=True,
    cosmology_when={"per": ("dX",)},
    exactly_one_of=(("tau_min", "log_nhi_min"),),
)


def column_limits(data: DataSet, setting: Setting) -> tuple[float, float]:
    """Return the column range [dex of cm^-2] that a file's meta states."""
    lo = data.meta.get("log_nhi_min")
    if lo is None:
        lo = log_nhi_at_tau(float(data.meta["tau_min"]))
    hi = data.meta.get("log_nhi_max")
    return float(lo), setting.column_range[1] if hi is None else float(hi)


class LlsIncidence:
    """Incidence, or number found on a searched path, of Lyman-limit systems."""

    spec = SPEC
    label = r"LLS incidence $\ell$"

    def respond(self, data: DataSet, setting: Setting) -> Block:
        """Return one raw prediction a row: ℓ in the file's convention, or the expected count."""
        log_nhi, d_nhi = column_nodes(*column_limits(data, setting), setting.distribution.kinks)
        path = np.where(np.isnan(data.search_path), 1.0, data.search_path)
        terms = [
            (row, Term(z, log_nhi, weight * path[row] * path_ratio(data, setting, z) * d_nhi))
            for row, z, weight in row_redshifts(data, setting)
        ]
        return assemble(terms, data.n_rows)

    def reduce(self, data: DataSet, raw: Array, constants: Mapping[str, Array]) -> Array:
        """Return the raw predictions: they are those of the rows."""
        return raw
