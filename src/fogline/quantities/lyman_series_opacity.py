"""Effective optical depth in a higher line of the Lyman series: Lyβ, Lyγ, ...

    τ_eff(z) = Σ_k (1+z_k)/λ_k · dX/dz · ∫ f(N,z_k) W_k(N) dN,     1 + z_k = (1+z) λ_n / λ_k

at absorption redshift z in the line 1 → n. Where the foreground is ``removed`` only k = n counts;
where it is ``included`` so do all longer lines of the series, which absorb the same wavelengths
at lower redshift (Lyα at 1 + z' = (1+z) λ_n/λ_α, ...). Lines as in `quantities.lya_opacity`.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_SERIES, LymanLine
from fogline.datasets import DataSet
from fogline.doppler import mean_equivalent_width
from fogline.quadrature import column_nodes
from fogline.quantities.base import (
    Block,
    Setting,
    Term,
    assemble,
    bin_mean,
    over_doppler,
    row_redshifts,
)
from fogline.quantities.lya_opacity import FORM, VALUES, reduce_tau
from fogline.quantities.spec import FileSpec, MetaKey, column_key
from fogline.settings import Distribution

Array = NDArray[np.float64]

LINES: Final = {
    name: LYMAN_SERIES[i]
    for i, name in enumerate(("beta", "gamma", "delta", "epsilon", "zeta", "eta"), start=1)
}
"""The lines that a file may speak of, by name: upper levels 3 to 8."""

SPEC: Final = FileSpec(
    quantity="lyman_series_opacity",
    description="Effective optical depth, mean flux or decrement in a higher Lyman line.",
    meta=(
        MetaKey(
            "line",
            "choice",
            "line of the Lyman series in which z is the absorption redshift",
            choices=tuple(LINES),
            example="beta",
        ),
        MetaKey(
            "foreground",
            "choice",
            "absorption by longer lines of the series at lower redshift: included or removed",
            choices=("included", "removed"),
            example="removed",
        ),
        FORM,
        column_key("min", "lowest column counted", True, 12.0),
        column_key("max", "highest column counted (optically thick ones removed?)", True, 17.2),
    ),
    values=VALUES,
    form_key="form",
)


class LymanSeriesOpacity:
    """Effective optical depth in a higher line of the Lyman series."""

    spec = SPEC
    label = "Lyman-series effective optical depth"

    def respond(self, data: DataSet, setting: Setting) -> Block:
        """Return one raw prediction, τ_eff, for every redshift node."""
        return over_doppler(setting, lambda doppler: self._block(data, setting, doppler))

    def _block(self, data: DataSet, setting: Setting, doppler: Distribution) -> Block:
        lo, hi = float(data.meta["log_nhi_min"]), float(data.meta["log_nhi_max"])
        log_nhi, d_nhi = column_nodes(lo, hi, setting.distribution.kinks)
        nodes = row_redshifts(data, setting)
        main = LINES[data.meta["line"]]
        terms = []
        for line in absorbing_lines(main, data.meta["foreground"] == "included"):
            kernel = mean_equivalent_width(log_nhi, doppler, line) / line.wavelength * d_nhi
            for i, (_, z, _) in enumerate(nodes):
                z_line = (1.0 + z) * main.wavelength / line.wavelength - 1.0
                if z_line < 0.0:  # that line's absorbers would lie in front of the observer
                    continue
                along = (1.0 + z_line) * float(setting.cosmology.dx_dz(z_line))
                terms.append((i, Term(z_line, log_nhi, along * kernel)))
        return assemble(terms, len(nodes), mean=bin_mean(nodes, data.n_rows))

    def reduce(self, data: DataSet, raw: Array, constants: Mapping[str, Array]) -> Array:
        """Return τ, mean flux or decrement of every row."""
        return reduce_tau(data.meta["form"], raw, constants["mean"])


def absorbing_lines(main: LymanLine, foreground: bool) -> tuple[LymanLine, ...]:
    """Return the lines that absorb where `main` does: itself, and all longer ones if asked."""
    if not foreground:
        return (main,)
    return tuple(line for line in LYMAN_SERIES if line.n <= main.n)
