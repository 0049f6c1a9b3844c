"""The derived quantities by which fits are compared, judged and forecast.

At few redshifts and columns, so that thousands of draws of them take a moment.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.derived import DERIVED_TABLES, Draws

Array = NDArray[np.float64]

REDSHIFTS: Final = (2.5, 3.5, 4.5)
"""Redshifts of headline quantities; of tables the nearest is taken."""

COLUMNS: Final = (13.5, 15.0, 16.5, 18.0, 19.5, 20.5, 21.5)
"""Columns at which log f is one of them [dex of cm^-2]."""


@dataclass(frozen=True)
class Headline:
    """A derived quantity along redshift.

    Parameters
    ----------
    quantity : str
        Its name in tables that compare.
    table : str
        The derived table that holds it.
    curve : str
        Which of the table's curves; empty where there is one only.
    """

    quantity: str
    table: str
    curve: str


HEADLINES: Final = (
    Headline("tau_eff", "lya_opacity", ""),
    Headline("lx_lls_tau2", "incidence", "lx_lls_tau2"),
    Headline("lx_dla", "incidence", "lx_dla"),
    Headline("mean_free_path_local", "mean_free_path", "local"),
    Headline("mean_free_path_unit_depth", "mean_free_path", "unit_depth"),
    Headline("rho_hi", "hi_density", "rho_hi"),
)
"""Headline quantities along redshift; log f is one along columns."""


@dataclass(frozen=True)
class HeadlineDraws:
    """Draws of every headline quantity.

    Parameters
    ----------
    quantities : tuple of str
    z : ndarray, shape (n_quantities,)
    values : ndarray, shape (n_draws, n_quantities)
        In the units of the derived tables; +inf for a free path beyond reach.
    """

    quantities: tuple[str, ...]
    z: Array
    values: Array

    @property
    def keys(self) -> tuple[str, ...]:
        """Quantity and redshift as one name, such as ``rho_hi@2.5``."""
        return tuple(f"{q}@{z:g}" for q, z in zip(self.quantities, self.z, strict=True))

    def by_key(self) -> dict[str, Array]:
        """Return the draws of every quantity, each (n_draws,), by `keys`."""
        return dict(zip(self.keys, self.values.T, strict=True))


def headline_draws(draws: Draws) -> HeadlineDraws:
    """Return the headline quantities of every draw.

    Parameters
    ----------
    draws : Draws
        Their redshifts are those of the derived tables: the ones nearest to `REDSHIFTS` are used.
    """
    grid = draws.z
    nearest = sorted({int(np.argmin(np.abs(grid - z))) for z in REDSHIFTS})
    few = replace(draws, derive=replace(draws.derive, redshifts=tuple(grid[nearest].tolist())))
    names: list[str] = []
    columns: list[Array] = []
    for headline in HEADLINES:
        curves = DERIVED_TABLES[headline.table].curves(few)
        (only, *_) = curves.values()
        values = curves[headline.curve].values if headline.curve else only.values
        names += [headline.quantity] * values.shape[1]
        columns.append(values)
    z = np.tile(few.z, len(HEADLINES))
    lo, hi = draws.setting.column_range
    inside = [c for c in COLUMNS if lo <= c <= hi]
    reference = float(draws.derive.column_redshifts[0])
    columns.append(draws.setting.distribution.log_f(draws.theta, np.array(inside), reference))
    names += [f"log_f[{c:g}]" for c in inside]
    z = np.concatenate([z, np.full(len(inside), reference)])
    return HeadlineDraws(tuple(names), z, np.concatenate(columns, axis=1))
