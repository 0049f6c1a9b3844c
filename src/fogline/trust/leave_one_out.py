"""Every row predicted by all the others.

A posterior that has seen a datum predicts it too well. With weights 1 / p(y_i | θ), smoothed
(`fogline.trust.weights`), posterior draws stand for the fit without row i, and

    PIT_i = P(y_rep < y_i | other rows)

is uniform where model and errors are right; for counts a uniform share of P(y_rep = y_i) is added,
so that it is uniform for them as well. Rows with a covariance are left out given the others of
their data set; the bins in which a list of absorbers is shown are predicted without the whole list.
Below, PITs are used as normal scores u = Φ⁻¹(PIT): the pull that a datum has against the rest.

(Gelfand 1996; Vehtari, Gelman & Gabry 2017, Statistics and Computing 27, 1413; randomised PIT:
Czado, Gneiting & Held 2009, Biometrics 65, 1254.)
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp, ndtri

from fogline.datasets import DataSet
from fogline.likelihood import Likelihood
from fogline.response import Response
from fogline.trust.weights import smoothed_weights

Array = NDArray[np.float64]

FARTHEST: Final = 1e-12
"""PITs are kept this far from 0 and 1: scores end at 7σ."""


@dataclass(frozen=True)
class LeaveOneOut:
    """What all other data say of each row.

    Parameters
    ----------
    pit : ndarray, shape (n_rows,)
        Of the measurement behind it for a limit.
    p_value : ndarray, shape (n_rows,)
        Two-sided; one-sided for limits.
    pareto_k : ndarray, shape (n_rows,)
        From 0.7 on the row's numbers can't be trusted.
    ln_p : ndarray, shape (n_rows,)
        ln of the predictive density of the datum, without it; of a whole list of absorbers at its
        first row, and zero at its others.
    score : ndarray, shape (n_rows,)
        Φ⁻¹(PIT).
    """

    pit: Array
    p_value: Array
    pareto_k: Array
    ln_p: Array

    @property
    def score(self) -> Array:
        """Normal scores."""
        return np.asarray(ndtri(np.clip(self.pit, FARTHEST, 1.0 - FARTHEST)))


def leave_one_out(response: Response, theta: Array, rng: np.random.Generator) -> LeaveOneOut:
    """Predict every row from all the others.

    Parameters
    ----------
    response : Response
    theta : ndarray, shape (n_draws, n_parameters)
        Posterior draws, nuisance parameters included.
    rng : numpy.random.Generator
        Randomises the PITs of counts.
    """
    likelihood = Likelihood.from_datasets(response.datasets)
    predicted, nuisances = response.predict(theta), theta[:, response.n_parameters :]
    ln_rows = likelihood.ln_conditional(predicted, nuisances)
    units = _units(response.datasets, ln_rows)
    ln_weight, k = smoothed_weights(-units)
    ln_p = logsumexp(ln_weight + units, axis=0)
    below, at = likelihood.tails(predicted, nuisances)
    # Each list is one unit, used for all of its rows.
    which = _unit_of_rows(response.datasets)
    weight = np.exp(ln_weight)[:, which]
    below, at = (np.einsum("nr,nr->r", weight, part) for part in (below, at))
    pit = np.clip(below + rng.random(len(below)) * at, 0.0, 1.0)
    two_sided = np.minimum(1.0, 2.0 * np.minimum(pit, 1.0 - pit))
    one_sided = np.where(likelihood.limit > 0, pit, 1.0 - pit)
    first = np.concatenate([[True], np.diff(which) > 0])
    return LeaveOneOut(
        pit=pit,
        p_value=np.where(likelihood.limit == 0, two_sided, one_sided),
        pareto_k=k[which],
        ln_p=np.where(first, ln_p[which], 0.0),
    )


def _unit_of_rows(datasets: Sequence[DataSet]) -> NDArray[np.int64]:
    """Return which unit of what is left out each row belongs to."""
    new = [
        np.arange(data.n_rows) == 0 if data.role is not None else np.ones(data.n_rows, dtype=bool)
        for data in datasets
    ]
    return (np.cumsum(np.concatenate(new)) - 1).astype(np.int64)


def _units(datasets: Sequence[DataSet], ln_rows: Array) -> Array:
    """Return ln p of every row, those of a list of absorbers added up, shape (n, n_units)."""
    unit = _unit_of_rows(datasets)
    starts = np.flatnonzero(np.concatenate([[True], np.diff(unit) > 0]))
    return np.asarray(np.add.reduceat(ln_rows, starts, axis=1))
