"""Draws of the quantities that analyses are compared by, for forecasts.

The same headline quantities, redshifts and columns as in `fogline.comparison`, from the same
functions that make the derived tables.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fogline.comparison import COLUMNS, HEADLINES, REDSHIFTS
from fogline.derived import DERIVED_TABLES, Draws
from fogline.trust.forecast import forecast_key

Array = NDArray[np.float64]


def headline_draws(draws: Draws) -> dict[str, Array]:
    """Return every headline quantity for every draw, by `forecast_key`.

    Parameters
    ----------
    draws : Draws
        Of its redshifts those nearest to the ones of the comparison are taken; log f is at the
        first column redshift.

    Returns
    -------
    dict of str to ndarray, shape (n_draws,)
        In the units of the derived tables; may hold infinities (paths beyond reach).
    """
    made: dict[str, Array] = {}
    nearest = sorted({int(np.argmin(np.abs(draws.z - z))) for z in REDSHIFTS})
    for headline in HEADLINES:
        curves = DERIVED_TABLES[headline.table].curves(draws)
        name = headline.prefix.removesuffix("_") or next(iter(curves))
        for i in nearest:
            made[forecast_key(headline.quantity, draws.z[i])] = curves[name].values[:, i]
    z = draws.derive.column_redshifts[0]
    lo, hi = draws.setting.column_range
    columns = np.array([column for column in COLUMNS if lo <= column <= hi])
    log_f = draws.setting.distribution.log_f(draws.theta, columns, z)
    for column, values in zip(columns, np.moveaxis(log_f, -1, 0), strict=True):
        made[forecast_key(f"log_f[{column:g}]", z)] = values
    return made
