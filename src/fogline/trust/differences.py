"""How far two analyses of shared data may differ by the noise that they do not share.

In the posterior of a linear model with normal errors, a datum that is higher by one of its σ moves
the mean of a quantity by its covariance with the prediction in that unit, K_i = Cov(q, m_i / σ_i);
with the prior as data (unit-normal coordinates, K_j = Cov(q, x_j)) Σ K² is the variance of q. Two
analyses A and B that answer to the same noise therefore differ by a variance of

    Σ_i (K_Ai - K_Bi)²     over the rows of both and the coordinates of both priors,

K being zero where an analysis has not the row. For nested analyses this is var(subset) - var(all),
for disjoint ones the sum in quadrature (but for what they share of the prior). Covariances of draws
give K without derivatives. Curved posteriors: first order. Counts, limits, Student-t errors and
lists of absorbers count as in `fogline.trust.information`.

Rows are shared where data set, file content, settings of the data set and row are the same;
coordinates of the prior where name and prior are. Different priors are compared as if they were
independent statements. From n draws a K has a variance of (var(q) var(m_i/σ_i) + K²) / n, whose sum
is taken off; what is then left below `LEAST` is no error of a difference.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fogline.headlines import HeadlineDraws
from fogline.provenance import to_json
from fogline.response_file import Fit
from fogline.trust.information import RowPulls

Array = NDArray[np.float64]
Key = tuple[str, ...]

LEAST: Final = 0.1
"""Error of a difference, in units of the larger of both errors, below which no shift has a σ."""


@dataclass(frozen=True)
class Influence:
    """What moves the quantities of one analysis, row by row.

    Parameters
    ----------
    quantities : tuple of (str, float)
        Names and redshifts.
    sigma : ndarray, shape (n_quantities,)
        Standard deviations of the draws.
    rows : dict
        K of every row and prior coordinate, shape (n_quantities,), by what identifies it.
    weights : dict
        Information per squared K; one for ordinary rows.
    noise : ndarray, shape (n_quantities,)
        Sum of the Monte Carlo variances of all K.
    """

    quantities: tuple[tuple[str, float], ...]
    sigma: Array
    rows: dict[Key, Array]
    weights: dict[Key, float]
    noise: Array

    @property
    def linear_sigma(self) -> Array:
        """Root of Σ K²: near `sigma` where the posterior is nearly linear."""
        total = sum((self.weights[key] * k**2 for key, k in self.rows.items()), np.zeros(1))
        return np.sqrt(np.maximum(total, 0.0))


def influence_of(fit: Fit, x: Array, theta: Array, headlines: HeadlineDraws) -> Influence:
    """Return what moves the headline quantities of a fit.

    Parameters
    ----------
    fit : Fit
    x, theta : ndarray, shape (n_draws, n_dim)
        The same posterior draws in both spaces.
    headlines : HeadlineDraws
        Of the same draws.
    """
    values = headlines.values
    finite = np.isfinite(values).all(axis=0)
    pulls = RowPulls.at(fit.posterior, theta.mean(axis=0))
    of_rows = _covariance(values, pulls.pulls(theta))
    of_prior = _covariance(values, x)
    sigma = np.where(finite, np.where(finite, values, 0.0).std(axis=0, ddof=1), np.inf)
    rows: dict[Key, Array] = {}
    weights: dict[Key, float] = {}
    noise = np.zeros(values.shape[1])
    spread = pulls.pulls(theta).var(axis=0)
    for data, part in zip(fit.response.datasets, fit.response.slices, strict=True):
        inputs = fit.provenance["inputs"]
        content = [inputs.get(path, path) for path in (data.path, *data.linked)]
        identity = (data.name, to_json(content), to_json(dict(data.meta)))
        for row, at in enumerate(range(part.start, part.stop)):
            if pulls.weight[at] != 0.0:
                key: Key = (*identity, str(row))
                rows[key], weights[key] = of_rows[:, at], float(pulls.weight[at])
                noise += weights[key] * (sigma**2 * spread[at] + of_rows[:, at] ** 2)
    for column, name in enumerate(fit.prior.coordinate_names):
        key = ("prior", name, to_json(_prior_of(fit, name)))
        rows[key], weights[key] = of_prior[:, column], 1.0
        noise += sigma**2 * float(x[:, column].var()) + of_prior[:, column] ** 2
    pairs = zip(headlines.quantities, headlines.z, strict=True)
    names = tuple((q, float(z)) for q, z in pairs)
    return Influence(names, sigma, rows, weights, noise / len(values))


def _prior_of(fit: Fit, name: str) -> Any:
    """Return the settings behind one coordinate of the prior."""
    model = fit.analysis.model
    if name.startswith("anchor["):
        return model.prior.anchor
    if name.startswith("slope["):
        return [model.prior.slope_kind, model.prior.first_slope, model.prior.slope_step]
    if name.startswith("evolution["):
        return list(model.evolution.priors)
    own = {nuisance.name: dict(nuisance.prior) for nuisance in fit.prior.nuisances}
    return own.get(name, [model.doppler, model.high_column])


def _covariance(values: Array, others: Array) -> Array:
    """Return covariances of columns, shape (n_values, n_others); zero where one is not finite."""
    good = np.isfinite(values).all(axis=0)
    fine = np.isfinite(others).all(axis=0)
    left = np.where(good, values, 0.0)
    right = np.where(fine, others, 0.0)
    left = left - left.mean(axis=0)
    return np.asarray(left.T @ (right - right.mean(axis=0)) / (len(values) - 1.0))


def difference_sigma(first: Influence, second: Influence) -> dict[tuple[str, float], float]:
    """Return the error of the difference of every quantity that two analyses have.

    Parameters
    ----------
    first, second : Influence

    Returns
    -------
    dict
        By quantity and redshift; NaN where the difference is too small to have an error (`LEAST`),
        or a quantity is not finite.
    """
    at = {quantity: i for i, quantity in enumerate(second.quantities)}
    found: dict[tuple[str, float], float] = {}
    keys = first.rows.keys() | second.rows.keys()
    for i, quantity in enumerate(first.quantities):
        if quantity not in at:
            continue
        j = at[quantity]
        variance = sum(
            first.weights.get(key, second.weights.get(key, 0.0))
            * (_at(first, key, i) - _at(second, key, j)) ** 2
            for key in keys
        )
        variance -= first.noise[i] + second.noise[j]
        largest = max(first.sigma[i], second.sigma[j])
        error = float(np.sqrt(max(variance, 0.0)))
        usable = np.isfinite(largest) and error > LEAST * largest
        found[quantity] = error if usable else float("nan")
    return found


def _at(influence: Influence, key: Key, quantity: int) -> float:
    return float(influence.rows[key][quantity]) if key in influence.rows else 0.0
