"""Derived tables and exports of an analysis from its posterior file."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from fogline.datasets import DataSet
from fogline.derived import Draws, write_derived
from fogline.exports import write_exports
from fogline.filters import read_filters
from fogline.posterior_file import read_draws
from fogline.quantities import Setting
from fogline.response_file import Fit
from fogline.settings import AnalysisSettings
from fogline.side_tables import read_side_table
from fogline.tables import read_table

Array = NDArray[np.float64]


def derive_tables(fit: Fit, posterior: str | Path, directory: str | Path) -> list[str]:
    """Write every derived table with bands; return what to note of them, a line each.

    Parameters
    ----------
    fit : Fit
    posterior : path-like
        Posterior file.
    directory : path-like
        Folder of the tables.
    """
    derive = fit.analysis.derive
    theta = read_draws(posterior, derive.draws)
    meta = fit.table_meta() | {"draws": len(theta)}
    draws = make_draws(theta, fit.setting, fit.analysis, highest_column(fit.response.datasets))
    return write_derived(draws, directory, with_bands=True, **meta)


def make_draws(
    theta: Array, setting: Setting, analysis: AnalysisSettings, highest: float | None = None
) -> Draws:
    """Return parameter vectors with all that derived quantities need beside them.

    Parameters
    ----------
    theta : ndarray, shape (n_draws, n_parameters)
    setting : Setting
    analysis : AnalysisSettings
    highest : float, optional [dex of cm^-2]
        Upper end of the columns that data speak of.

    Raises
    ------
    InputError
        With the faults of filters and other tables.
    """
    derive = analysis.derive
    kind = derive.background_kind
    background = read_side_table(derive.background[kind], kind) if kind else {}
    filters = read_filters(derive.filters)
    seed = analysis.sampler.seed
    return Draws(theta, setting, derive, filters, seed, kind, background, highest)


def highest_column(datasets: Sequence[DataSet]) -> float | None:
    """Return the upper end of the columns that data sets counted; None where none did."""
    ends = [float(data.column_bins.max()) for data in datasets if data.column_bins.size]
    return max(ends, default=None)


def export_results(
    fit: Fit, *, posterior: str | Path, parameters: str | Path, directory: str | Path
) -> None:
    """Write the files of an analysis that other programs read.

    Parameters
    ----------
    fit : Fit
    posterior, parameters : path-like
        Posterior file, and table of parameters.
    directory : path-like
        Folder of the exports.
    """
    theta = read_draws(posterior, fit.analysis.derive.draws)
    draws = make_draws(theta, fit.setting, fit.analysis)
    write_exports(draws, read_table(parameters), directory, fit.table_meta())
