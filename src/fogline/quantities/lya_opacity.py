"""Lyα effective optical depth, as τ, mean flux or decrement.

    τ_eff(z) = (1+z)/λ_α · dX/dz · ∫ f(N,z) W(N) dN

W is the rest equivalent width of the exact Voigt line, averaged over the Doppler parameters
(`fogline.doppler`). The integral runs over the columns that the file says were counted: most
published values remove absorbers that are optically thick. Neither τ_eff nor the flux depends on
the cosmology, since f dX/dz is what is counted on the sky.

In a redshift bin the mean is taken of what the file states (τ, flux or decrement).
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_ALPHA
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
from fogline.quantities.spec import FileSpec, MetaKey, ValueColumn, column_key
from fogline.settings import Distribution

Array = NDArray[np.float64]

FORM: Final = MetaKey(
    "form",
    "choice",
    "what the numbers are: tau (-ln mean flux), mean_flux, decrement (1 - mean flux)",
    choices=("tau", "mean_flux", "decrement"),
    example="tau",
)
"""The meta key that says what the numbers of an effective optical depth are."""

VALUES: Final = {
    "tau": ValueColumn(example=0.25, example_err=0.02, help="effective optical depth"),
    "mean_flux": ValueColumn(
        maximum=1.0, example=0.78, example_err=0.02, help="mean transmitted flux"
    ),
    "decrement": ValueColumn(
        maximum=1.0, example=0.22, example_err=0.02, help="1 - mean transmitted flux"
    ),
}
"""The measured column in each of these forms."""

SPEC: Final = FileSpec(
    quantity="lya_opacity",
    description="Effective optical depth of the Lyα forest, mean flux, or flux decrement.",
    meta=(
        FORM,
        column_key("min", "lowest column counted", True, 12.0),
        column_key("max", "highest column counted (optically thick ones removed?)", True, 17.2),
    ),
    values=VALUES,
    form_key="form",
)


class LyaOpacity:
    """Effective optical depth of the Lyα forest."""

    spec = SPEC
    label = r"Ly$\alpha$ effective optical depth"

    def respond(self, data: DataSet, setting: Setting) -> Block:
        """Return one raw prediction, τ_eff, for every redshift node."""
        return over_doppler(setting, lambda doppler: self._block(data, setting, doppler))

    def _block(self, data: DataSet, setting: Setting, doppler: Distribution) -> Block:
        lo, hi = float(data.meta["log_nhi_min"]), float(data.meta["log_nhi_max"])
        log_nhi, d_nhi = column_nodes(lo, hi, setting.distribution.kinks)
        width = mean_equivalent_width(log_nhi, doppler) / LYMAN_ALPHA.wavelength
        nodes = row_redshifts(data, setting)
        terms = [
            (i, Term(z, log_nhi, (1.0 + z) * setting.cosmology.dx_dz(z) * width * d_nhi))
            for i, (_, z, _) in enumerate(nodes)
        ]
        return assemble(terms, len(nodes), mean=bin_mean(nodes, data.n_rows))

    def reduce(self, data: DataSet, raw: Array, constants: Mapping[str, Array]) -> Array:
        """Return τ, mean flux or decrement of every row."""
        return reduce_tau(data.meta["form"], raw, constants["mean"])


def reduce_tau(form: str, tau: Array, mean: Array) -> Array:
    """Return effective optical depths in a form, averaged over redshift bins.

    Parameters
    ----------
    form : {"tau", "mean_flux", "decrement"}
    tau : ndarray, shape (..., n_nodes)
    mean : ndarray, shape (n_nodes, n_rows)
    """
    if form == "mean_flux":
        tau = np.exp(-tau)
    elif form == "decrement":
        tau = -np.expm1(-tau)
    return np.asarray(tau @ mean)
