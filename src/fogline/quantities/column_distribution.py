"""The distribution itself in bins of column density, as log f or as counts on a path.

    f_bin = ∫_bin f dN / ΔN,    n ~ Poisson(path · ∫_bin f dN)

The bin average of f, not f at the bin's centre: at a slope of −3 and 0.5 dex they differ by tens
of percent. ``per: dz`` means d²n/dN/dz instead of d²n/dN/dX.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np
from numpy.typing import NDArray

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
from fogline.quantities.spec import PER, FileSpec, ValueColumn

Array = NDArray[np.float64]

LOG_F_RANGE: Final = (-60.0, 0.0)
"""Values of log10 f [dex of cm^2] that a file may hold: generous, to catch f for log f."""

SPEC: Final = FileSpec(
    quantity="column_distribution",
    description="Column-density distribution f(N): absorbers per unit column and path, in bins.",
    meta=(PER,),
    values={
        "": ValueColumn(
            name="log_f",
            logarithmic=True,
            minimum=LOG_F_RANGE[0],
            maximum=LOG_F_RANGE[1],
            example=-21.7,
            example_err=0.1,
            help="log10 of f [cm^2] averaged over the bin, errors in dex",
        )
    },
    counts=True,
    column_bins=True,
    cosmology_when={"per": ("dX",)},
)


class ColumnDistributionBins:
    """Bin averages of f(N, X), or numbers of absorbers in bins of column density."""

    spec = SPEC
    label = r"$\log_{10} f(N_\mathrm{HI}, X)$ [cm$^2$]"

    def respond(self, data: DataSet, setting: Setting) -> Block:
        """Return one raw prediction a row: f_bin, or the expected count."""
        terms = []
        for row, z, weight in row_redshifts(data, setting):
            lo, hi = data.log_nhi_lo[row], data.log_nhi_hi[row]
            log_nhi, d_nhi = column_nodes(lo, hi, setting.distribution.kinks)
            scale = data.search_path[row] if data.counts else 1.0 / (10.0**hi - 10.0**lo)
            ratio = path_ratio(data, setting, z)
            terms.append((row, Term(z, log_nhi, weight * scale * ratio * d_nhi)))
        return assemble(terms, data.n_rows)

    def reduce(self, data: DataSet, raw: Array, constants: Mapping[str, Array]) -> Array:
        """Return log10 f of every row, or the expected count."""
        return raw if data.counts else np.log10(raw)
