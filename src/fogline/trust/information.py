"""Which data set constrains what, and where only the prior does.

Near the posterior mean x̄, in coordinates x whose prior is a unit normal, every data set d adds its
Fisher information F_d to that of the prior, which is 1:

    C = (1 + Σ_d F_d)⁻¹,      F_d = Σ_i (∂m_i/∂x) (∂m_i/∂x)ᵀ / σ_i²

(of counts with σ² = μ; of a limit with the information that a measurement at or beyond it carries;
of a list of absorbers Σ n_g ∇ln λ_g ∇ln λ_gᵀ over its cells; covariances whitened). For a quantity
with gradient g the variance is gᵀCg = Σ_d gᵀ C F_d C g + gᵀ C C g: the terms, as shares of the
whole, add up to one, and the last is the prior's. tr(C F_d) is the number of parameters that data
set d fixes. The information that data carry on an extra `scatter` of their own is not counted.

The linear error is compared with that of the draws: where they differ much, the posterior is
curved and the shares are a guide only.

Power-scaling: with the prior (the likelihood) raised to a power α, the mean of a quantity moves by
``ln 2 · Cov(q, ln p) / sd(q)`` in units of its error when α doubles, to first order (Kallioinen,
Paananen, Bürkner & Vehtari 2023, Statistics and Computing 34, 57). Both large: prior and data
disagree.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from fogline.datasets import INTENSITY, DataSet
from fogline.posterior import Posterior

Array = NDArray[np.float64]

STEP: Final = 1e-3
"""Half the difference of x over which gradients are taken."""


@dataclass(frozen=True)
class Information:
    """Fisher information of every data set at one point.

    Parameters
    ----------
    names : tuple of str
        Data sets.
    fisher : ndarray, shape (n_datasets, n_dim, n_dim)
    """

    names: tuple[str, ...]
    fisher: Array

    @cached_property
    def covariance(self) -> Array:
        """C, shape (n_dim, n_dim)."""
        return np.linalg.inv(np.eye(self.fisher.shape[1]) + self.fisher.sum(axis=0))

    @property
    def n_constrained(self) -> Array:
        """Parameters that each data set fixes, shape (n_datasets,)."""
        return np.asarray(np.einsum("ij,dji->d", self.covariance, self.fisher))

    @property
    def n_prior(self) -> float:
        """Parameters that are left to the prior."""
        return float(np.trace(self.covariance))

    def shares(self, gradient: Array) -> tuple[Array, Array, Array]:
        """Return linear errors, shares of data sets and of the prior.

        Parameters
        ----------
        gradient : ndarray, shape (n_quantities, n_dim)

        Returns
        -------
        sigma : ndarray, shape (n_quantities,)
        data : ndarray, shape (n_quantities, n_datasets)
        prior : ndarray, shape (n_quantities,)
            With `data` it adds up to one.
        """
        towards = gradient @ self.covariance
        variance = np.einsum("qi,qi->q", towards, gradient)
        whole = np.where(variance > 0.0, variance, 1.0)
        data = np.einsum("qi,dij,qj->qd", towards, self.fisher, towards) / whole[:, None]
        prior = np.einsum("qi,qi->q", towards, towards) / whole
        return np.sqrt(variance), data, prior


def gradient_of(function: Callable[[Array], Array], x: Array) -> Array:
    """Return ∂f/∂x at one point by central differences.

    Parameters
    ----------
    function : callable
        ``(n, n_dim) -> (n, n_quantities)``.
    x : ndarray, shape (n_dim,)

    Returns
    -------
    ndarray, shape (n_quantities, n_dim)
        Zero where a difference is not finite.
    """
    step = STEP * np.eye(len(x))
    values = function(np.concatenate([x + step, x - step]))
    with np.errstate(invalid="ignore"):
        difference = (values[: len(x)] - values[len(x) :]) / (2.0 * STEP)
    return np.where(np.isfinite(difference), difference, 0.0).T


@dataclass(frozen=True)
class RowPulls:
    """Pulls of every row as functions of the parameters, for data that lie where the model does.

    Parameters
    ----------
    posterior : Posterior
    data : ndarray, shape (n_rows,)
        Predictions at one point in the data's own space, and the measurements behind limits.
    weight : ndarray, shape (n_rows,)
        Information per squared gradient of a pull.
    """

    posterior: Posterior
    data: Array
    weight: Array

    @classmethod
    def at(cls, posterior: Posterior, theta: Array) -> RowPulls:
        """Return the pulls about one parameter vector, shape (n_parameters,)."""
        response, likelihood = posterior.response, posterior.likelihood
        predicted, nuisances = response.predict(theta[None]), theta[None, response.n_parameters :]
        middle = likelihood.in_data_space(likelihood.scaled(predicted, nuisances))[0]
        limited = likelihood.limit != 0
        gap = np.zeros(len(middle))
        if limited.any():
            pulls = likelihood.standardize(likelihood.observed, predicted, nuisances)[0]
            gap[limited] = (likelihood.limit * pulls)[limited]
        data = np.where(limited, likelihood.observed, middle)
        return cls(posterior, data, _weights(response.datasets, likelihood.rows.student_dof, gap))

    def pulls(self, theta: Array) -> Array:
        """Return pulls, and ln of the intensity of cells of lists, shape (n, n_rows).

        Their gradient is minus that of the prediction over its error; of cells it is that of ln λ.
        """
        response, likelihood = self.posterior.response, self.posterior.likelihood
        predicted, nuisances = response.predict(theta), theta[:, response.n_parameters :]
        with np.errstate(invalid="ignore", divide="ignore"):
            pulls = likelihood.standardize(self.data, predicted, nuisances)
            cells = likelihood.rows.role == INTENSITY
            pulls[:, cells] = np.log(likelihood.scaled(predicted, nuisances)[:, cells])
        return pulls


def information_at(posterior: Posterior, x: Array) -> Information:
    """Return the information of every data set.

    Parameters
    ----------
    posterior : Posterior
    x : ndarray, shape (n_dim,)
        Such as the posterior mean, in unit-normal coordinates.
    """
    to_parameters = posterior.prior.to_parameters
    rows = RowPulls.at(posterior, to_parameters(x[None])[0])
    gradient = gradient_of(lambda points: rows.pulls(to_parameters(points)), x)
    return Information(
        tuple(data.name for data in posterior.response.datasets),
        np.array(
            [
                (gradient[part] * rows.weight[part, None]).T @ gradient[part]
                for part in posterior.response.slices
            ]
        ),
    )


def _weights(datasets: Sequence[DataSet], dof: Array, gap: Array) -> Array:
    """Return the information of every row per squared gradient of its pull, shape (n_rows,)."""
    # Student's t knows less than a normal of the same scale; both limits of ν are right.
    weight = np.where(
        np.isfinite(dof), (dof + 1.0) / (np.where(np.isfinite(dof), dof, 1.0) + 3.0), 1.0
    )
    end = 0
    for data in datasets:
        start, end = end, end + data.n_rows
        if data.role is not None:
            # Cells count their absorbers; what is shown counts nothing twice.
            weight[start:end] = np.where(data.role == INTENSITY, data.observed, 0.0)
        limited = start + np.flatnonzero(data.limit != 0)
        if data.role is None and len(limited):
            chance = np.clip(ndtr(gap[limited]), 1e-300, 1.0 - 1e-15)
            density = np.exp(-0.5 * gap[limited] ** 2) / np.sqrt(2.0 * np.pi)
            weight[limited] = density**2 / (chance * (1.0 - chance))
    return weight


def power_scaling(values: Array, ln_density: Array) -> Array:
    """Return how far means move, in units of their errors, when a density's power doubles.

    Parameters
    ----------
    values : ndarray, shape (n_draws, n_quantities)
    ln_density : ndarray, shape (n_draws,)
        ln prior or ln likelihood of the draws.

    Returns
    -------
    ndarray, shape (n_quantities,)
        First order; NaN where a value is not finite.
    """
    centred = ln_density - ln_density.mean()
    with np.errstate(invalid="ignore", divide="ignore"):
        deviation = values - values.mean(axis=0)
        covariance = centred @ deviation / (len(values) - 1.0)
        shift = np.log(2.0) * covariance / values.std(axis=0, ddof=1)
    return np.asarray(np.where(np.isfinite(values).all(axis=0), shift, np.nan))
