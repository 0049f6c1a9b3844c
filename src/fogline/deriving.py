"""Derived tables and predictive check of an analysis from its posterior file."""

from __future__ import annotations

from pathlib import Path

from fogline.combining import replicate_rng
from fogline.derived import Draws, write_derived
from fogline.posterior_file import read_draws
from fogline.predictive import check_predictive, predictive_table
from fogline.response_file import Fit
from fogline.tables import write_table


def derive_tables(fit: Fit, posterior: str | Path, directory: str | Path) -> None:
    """Write every derived table with bands.

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
    write_derived(Draws(theta, fit.setting, derive), directory, with_bands=True, **meta)


def write_predictive(fit: Fit, posterior: str | Path, table: str | Path) -> None:
    """Write the posterior predictive check.

    Parameters
    ----------
    fit : Fit
    posterior : path-like
        Posterior file.
    table : path-like
        Table to write.
    """
    theta = read_draws(posterior, fit.analysis.derive.draws)
    check = check_predictive(fit.response, theta, replicate_rng(fit))
    datasets = fit.response.datasets
    write_table(predictive_table(datasets, check), table, **fit.table_meta(), draws=len(theta))
