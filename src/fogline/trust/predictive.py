"""Posterior predictive check: whether the fit, if true, makes data like those that were seen.

For every posterior draw one replicate of every row is drawn from the row's own likelihood. Rows:

* pull: (observed − predicted) / σ with the sign kept, predicted being the median prediction;
* p-value: two-sided, 2 min[P(rep ≤ obs), P(rep ≥ obs)] (ties shared, so that counts are treated
  fairly); for a limit one-sided, P(rep at or beyond the measurement behind the limit).

Data sets: the discrepancy T = Σ pull², each draw compared with its own prediction, and
p = P(T_rep ≥ T_obs). These p-values use the data twice, once to fit and once to judge, and so lean
towards 0.5: a small one is serious, an inconspicuous one is weak evidence (Gelman, Meng & Stern
1996, Statistica Sinica 6, 733). Rows are therefore flagged by what all *other* rows say of them
(`fogline.trust.leave_one_out`).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

from fogline.datasets import DataSet
from fogline.likelihood import Likelihood
from fogline.response import Response
from fogline.row_tables import row_table, visible_rows
from fogline.tables import bands
from fogline.trust.discrepancies import row_level
from fogline.trust.leave_one_out import LeaveOneOut, leave_one_out
from fogline.trust.weights import GOOD_K

Array = NDArray[np.float64]

DATASET_FLAG = 0.01
"""p-value below which (or above one minus which) a data set is flagged."""


@dataclass(frozen=True)
class PredictiveCheck:
    """Replicates of every row and what they say.

    Parameters
    ----------
    predicted : ndarray, shape (n_draws, n_rows)
        Predictions in each file's convention.
    replicates : ndarray, shape (n_draws, n_rows)
        Replicated data, in each file's convention.
    pulls, p_values : ndarray, shape (n_rows,)
    dataset_p_values : tuple of float
        One per data set.
    loo : LeaveOneOut
        Every row against all the others.
    """

    predicted: Array
    replicates: Array
    pulls: Array
    p_values: Array
    dataset_p_values: tuple[float, ...]
    loo: LeaveOneOut


def check_predictive(response: Response, theta: Array, rng: np.random.Generator) -> PredictiveCheck:
    """Compare the data with replicates.

    Parameters
    ----------
    response : Response
    theta : ndarray, shape (n_draws, n_parameters)
        Posterior draws, nuisance parameters included.
    rng : numpy.random.Generator
    """
    likelihood = Likelihood.from_datasets(response.datasets)
    predicted, nuisances = response.predict(theta), theta[:, response.n_parameters :]
    drawn = likelihood.replicate(predicted, rng, nuisances)
    middle = np.median(predicted, axis=0)[None], np.median(nuisances, axis=0)[None]
    squares = [
        _squares(likelihood, data, predicted, nuisances) for data in (drawn, likelihood.observed)
    ]
    return PredictiveCheck(
        predicted=likelihood.scaled(predicted, nuisances),
        replicates=likelihood.in_file_space(drawn),
        pulls=likelihood.standardize(likelihood.observed, *middle)[0],
        p_values=_row_p_values(likelihood, drawn),
        dataset_p_values=tuple(
            _discrepancy_p_value(squares[0][:, rows].sum(axis=1), squares[1][:, rows].sum(axis=1))
            for rows in response.slices  # rows of a process that are not shown have no pulls
        ),
        loo=leave_one_out(response, theta, rng),
    )


def _squares(likelihood: Likelihood, data: Array, predicted: Array, nuisances: Array) -> Array:
    pulls = likelihood.standardize(data, predicted, nuisances)
    # A limit is at odds with the prediction on one side only.
    pulls = np.where(likelihood.limit > 0, np.minimum(pulls, 0.0), pulls)
    pulls = np.where(likelihood.limit < 0, np.maximum(pulls, 0.0), pulls)
    return np.asarray(pulls**2)


def _discrepancy_p_value(replicated: Array, observed: Array) -> float:
    return float(np.mean(replicated > observed) + 0.5 * np.mean(replicated == observed))


def _row_p_values(likelihood: Likelihood, drawn: Array) -> Array:
    ties = 0.5 * np.mean(drawn == likelihood.observed, axis=0)
    below = np.mean(drawn < likelihood.observed, axis=0) + ties
    above = np.mean(drawn > likelihood.observed, axis=0) + ties
    two_sided = np.minimum(1.0, 2.0 * np.minimum(below, above))
    one_sided = np.where(likelihood.limit > 0, below, above)
    return np.where(likelihood.limit == 0, two_sided, one_sided)


def predictive_table(
    datasets: tuple[DataSet, ...], check: PredictiveCheck, false_alarm: float = 0.05
) -> Table:
    """Return one line a row: identity, observed value, replicate bands, pull, p-values, flag.

    Parameters
    ----------
    datasets : tuple of DataSet
    check : PredictiveCheck
    false_alarm : float
        Of all flags of rows and of `fogline.trust.discrepancies` together.
    """
    visible = visible_rows(datasets)
    level = row_level(int(visible.sum()), false_alarm)
    table = row_table(datasets)
    for name, values in bands(check.replicates).items():
        table[name] = values
    table["pull"] = check.pulls
    table["p_value"] = check.p_values
    table["loo_pit"] = check.loo.pit
    table["loo_p_value"] = check.loo.p_value
    # Equal weights have no tail at all.
    table["pareto_k"] = np.maximum(check.loo.pareto_k, -1.0)
    table["flag"] = ["outside" if p < level else "" for p in check.loo.p_value]
    table.meta["definition"] = (
        "Bands: replicates drawn from each row's likelihood over the posterior, in the unit and "
        "convention of the row's file. pull: (observed - median prediction) / sigma. p_value: two-"
        "sided for measurements and counts, one-sided for limits, from the fit that has seen the "
        "row. loo_pit: chance, predicted by all other rows, of a value below that observed; "
        f"loo_p_value: the same as a p-value, flagged below {level:.2g}, so that consistent data "
        f"raise a flag here or among the discrepancies with a chance of {false_alarm:g}. pareto_k:"
        f" of the weights that leave the row out; from {GOOD_K} on loo numbers can't be trusted."
    )
    table.meta["row_level"] = level
    table.meta["datasets"] = dataset_summary(datasets, check)
    return table[visible]


def dataset_summary(
    datasets: tuple[DataSet, ...], check: PredictiveCheck
) -> dict[str, dict[str, Any]]:
    """Return p-value and flag of every data set by its name."""
    summary = {}
    for data, p_value in zip(datasets, check.dataset_p_values, strict=True):
        flag = "scatter too large" if p_value < DATASET_FLAG else ""
        flag = "scatter too small" if p_value > 1.0 - DATASET_FLAG else flag
        summary[data.name] = {"p_value": p_value, "flag": flag, "quantity": data.quantity}
    return summary
