"""The checks that every fit gets, from its posterior file to tables."""

from __future__ import annotations

from pathlib import Path

from fogline.combining import replicate_rng
from fogline.derived import Draws
from fogline.deriving import make_draws
from fogline.posterior_file import read_coordinates, read_draws
from fogline.response_file import Fit
from fogline.tables import write_table
from fogline.trust.discrepancies import discrepancies, discrepancy_table
from fogline.trust.information_tables import Array, information_tables
from fogline.trust.predictive import check_predictive, predictive_table

LEAST_DRAWS = 4000
"""Draws that leaving rows out needs: weights make fewer of them."""


def write_checks(fit: Fit, posterior: str | Path, directory: str | Path) -> None:
    """Write the predictive check, discrepancies, and who constrains what.

    Parameters
    ----------
    fit : Fit
    posterior : path-like
        Posterior file.
    directory : path-like
        Folder of the tables: ``predictive``, ``discrepancies``, ``information``,
        ``information_by_column``, ``constraints``.
    """
    n_draws = max(fit.analysis.derive.draws, LEAST_DRAWS)
    theta, x = read_draws(posterior, n_draws), read_coordinates(posterior, n_draws)
    datasets, false_alarm = fit.response.datasets, fit.analysis.checks.false_alarm
    check = check_predictive(fit.response, theta, replicate_rng(fit))

    def derived(parameters: Array) -> Draws:
        return make_draws(parameters, fit.setting, fit.analysis)

    tables = {
        "predictive": predictive_table(datasets, check, false_alarm),
        "discrepancies": discrepancy_table(discrepancies(datasets, check.loo), false_alarm),
        **information_tables(fit.posterior, x, theta, derived),
    }
    for name, table in tables.items():
        path = Path(directory) / f"{name}.ecsv"
        write_table(table, path, **fit.table_meta(), draws=len(theta))
