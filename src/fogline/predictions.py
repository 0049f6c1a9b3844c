"""Predictions and derived tables at one given parameter vector."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

from fogline.datasets import DataSet
from fogline.derived import write_derived
from fogline.deriving import make_draws
from fogline.response_file import build_fit, setting_of
from fogline.row_tables import row_table, visible_rows
from fogline.settings import AnalysisSettings

Array = NDArray[np.float64]


def predict_table(analysis: AnalysisSettings, datasets: list[DataSet], point: Array) -> Table:
    """Return the prediction of every row, in the data's own convention.

    Parameters
    ----------
    analysis : AnalysisSettings
    datasets : list of DataSet
    point : ndarray, shape (n_parameters,)
        All parameters, those of the data sets' nuisances last.

    Returns
    -------
    astropy.table.Table
        Columns ``dataset row quantity z observed predicted``; meta ``ln_likelihood``.
    """
    fit = build_fit(analysis, datasets)
    table = row_table(fit.response.datasets)
    predicted = fit.response.predict(point[None])
    nuisances = point[None, fit.response.n_parameters :]
    table["predicted"] = fit.posterior.likelihood.scaled(predicted, nuisances)[0]
    table = table[visible_rows(datasets)]
    table.meta["ln_likelihood"] = float(fit.posterior.ln_likelihood(point[None])[0])
    table.meta.update(fit.table_meta())
    return table


def write_derived_at(analysis: AnalysisSettings, point: Array, directory: str | Path) -> list[str]:
    """Write the derived tables at given parameters, without bands; return notes, a line each.

    Parameters
    ----------
    analysis : AnalysisSettings
    point : ndarray, shape (n_parameters,)
    directory : path-like
    """
    draws = make_draws(point[None], setting_of(analysis), analysis)
    return write_derived(draws, directory, with_bands=False, analysis=analysis.name)
