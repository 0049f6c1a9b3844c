"""Likelihood of every row, and replicated data drawn from the same distributions.

Measurements are split-normal: each side has its own σ, chosen by the side on which the *prediction*
lies (above the datum: ``err_hi``)::

    p(y | m) = 2 / [√(2π) (σ_lo + σ_hi)] exp[−(m − y)² / (2σ²)]

``likelihood: lognormal`` takes the same density in ln y, with σ/y as errors (and the Jacobian 1/y).
Counts are Poisson. A limit at confidence C states that a true value equal to the limit L would
have given a lower (higher) measurement than the one made in only 1 − C of all trials; the row
contributes the probability of a measurement at or beyond the one made, not a datum with a large
error::

    upper: P(y ≤ y_made | m) = Φ[(L − m)/σ − z_C],   lower: Φ[(m − L)/σ − z_C],   z_C = Φ⁻¹(C)

with σ the row's error where the file states one, and L/z_C else (for an upper limit: a measurement
of zero). Densities are normalised in the data, so that evidences of models compare.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln, log_ndtr, ndtri, xlogy

from fogline.datasets import DataSet

Array = NDArray[np.float64]
Indices = NDArray[np.int64]


@dataclass(frozen=True)
class Likelihood:
    """Likelihood of the concatenated rows of all data sets.

    Parameters
    ----------
    observed : ndarray, shape (n_rows,)
        Measurement, count, or the measurement behind a limit; in ln where `log_normal`.
    sigma_lo, sigma_hi : ndarray, shape (n_rows,)
        Errors of each side; NaN for counts.
    log_normal, poisson : ndarray of bool, shape (n_rows,)
        Which rows are log-normal, and which are counts.
    limit : ndarray of int, shape (n_rows,)
        +1 upper, -1 lower, 0 none.
    """

    observed: Array
    sigma_lo: Array
    sigma_hi: Array
    log_normal: NDArray[np.bool_]
    poisson: NDArray[np.bool_]
    limit: Indices

    @cached_property
    def _normal(self) -> Indices:
        return np.flatnonzero(~self.poisson & (self.limit == 0))

    @cached_property
    def _counted(self) -> Indices:
        return np.flatnonzero(self.poisson)

    @cached_property
    def _limited(self) -> Indices:
        return np.flatnonzero(self.limit != 0)

    @cached_property
    def _logged(self) -> Indices:
        return np.flatnonzero(self.log_normal)

    @cached_property
    def _inverse_sigmas(self) -> tuple[Array, Array]:
        return 1.0 / self.sigma_lo[self._normal], 1.0 / self.sigma_hi[self._normal]

    @cached_property
    def _ln_norm(self) -> Array:
        rows = self._normal
        jacobian = np.where(self.log_normal[rows], self.observed[rows], 0.0)
        widths = self.sigma_lo[rows] + self.sigma_hi[rows]
        return np.asarray(np.log(2.0 / (np.sqrt(2.0 * np.pi) * widths)) - jacobian)

    @cached_property
    def _ln_factorial(self) -> Array:
        return np.asarray(gammaln(self.observed[self._counted] + 1.0))

    @classmethod
    def from_datasets(cls, datasets: Sequence[DataSet]) -> Likelihood:
        """Return the likelihood of data sets, their rows one after the other."""
        return cls(*(np.concatenate(parts) for parts in zip(*map(_rows, datasets), strict=True)))

    def ln_rows(self, predicted: Array) -> Array:
        """Return ln p of every row.

        Parameters
        ----------
        predicted : ndarray, shape (n, n_rows)

        Returns
        -------
        ndarray, shape (n, n_rows)
        """
        out = np.empty_like(predicted)
        out[:, self._normal] = self._ln_normal(predicted)
        out[:, self._counted] = self._ln_poisson(predicted)
        out[:, self._limited] = self._ln_limits(predicted)
        return out

    def ln_total(self, predicted: Array) -> Array:
        """Return ln p of all rows together.

        Parameters
        ----------
        predicted : ndarray, shape (n, n_rows)

        Returns
        -------
        ndarray, shape (n,)
        """
        total = self._ln_normal(predicted).sum(axis=1)
        if len(self._counted):
            total += self._ln_poisson(predicted).sum(axis=1)
        if len(self._limited):
            total += self._ln_limits(predicted).sum(axis=1)
        return np.asarray(total)

    def standardize(self, data: Array, predicted: Array) -> Array:
        """Return pulls, (data − predicted) / σ, with the σ of the prediction's side.

        Parameters
        ----------
        data : ndarray, shape (..., n_rows)
            Observed or replicated, as `observed` (ln for log-normal rows).
        predicted : ndarray, shape (..., n_rows)
            Predictions in the file's convention.

        Returns
        -------
        ndarray, shape (..., n_rows)
            For counts (n − μ) / √μ.
        """
        model = self.in_data_space(predicted)
        sigma = np.where(model > data, self.sigma_hi, self.sigma_lo)
        sigma = np.where(self.poisson, np.sqrt(np.where(self.poisson, model, 1.0)), sigma)
        return np.asarray((data - model) / sigma)

    def in_data_space(self, predicted: Array) -> Array:
        """Return predictions with log-normal rows in ln."""
        if not len(self._logged):
            return predicted
        predicted = predicted.copy()
        predicted[..., self._logged] = np.log(predicted[..., self._logged])
        return predicted

    def in_file_space(self, data: Array) -> Array:
        """Return data of `in_data_space` in the file's convention; the inverse."""
        return np.where(self.log_normal, np.exp(np.where(self.log_normal, data, 0.0)), data)

    def replicate(self, predicted: Array, rng: np.random.Generator) -> Array:
        """Draw replicated data from the distribution of every row (`in_data_space`).

        Parameters
        ----------
        predicted : ndarray, shape (n, n_rows)
        rng : numpy.random.Generator

        Returns
        -------
        ndarray, shape (n, n_rows)
        """
        model = self.in_data_space(predicted)
        # p(y | m) as a density in y: below m the datum's upper error is the one that counts.
        below = rng.random(model.shape) * (self.sigma_lo + self.sigma_hi) < self.sigma_hi
        step = np.abs(rng.standard_normal(model.shape))
        drawn = model + step * np.where(below, -self.sigma_hi, self.sigma_lo)
        counted = self._counted
        drawn[:, counted] = rng.poisson(model[:, counted])
        return np.asarray(drawn)

    def _ln_normal(self, predicted: Array) -> Array:
        rows = self._normal
        residual = self.in_data_space(predicted)[:, rows] - self.observed[rows]
        inverse_lo, inverse_hi = self._inverse_sigmas
        residual *= np.where(residual > 0.0, inverse_hi, inverse_lo)
        residual *= residual
        residual *= -0.5
        residual += self._ln_norm
        return residual

    def _ln_poisson(self, predicted: Array) -> Array:
        mean = predicted[:, self._counted]
        return np.asarray(xlogy(self.observed[self._counted], mean) - mean - self._ln_factorial)

    def _ln_limits(self, predicted: Array) -> Array:
        rows = self._limited
        gap = (self.observed[rows] - self.in_data_space(predicted)[:, rows]) / self.sigma_hi[rows]
        return np.asarray(log_ndtr(self.limit[rows] * gap))


def _rows(data: DataSet) -> tuple[Array, Array, Array, Array, Array, Indices]:
    """Return the columns of `Likelihood` for one data set."""
    poisson = np.full(data.n_rows, data.counts)
    log_normal = np.full(data.n_rows, data.meta.get("likelihood") == "lognormal") & ~poisson
    observed, lo, hi = data.observed.copy(), data.err_lo.copy(), data.err_hi.copy()
    limited = data.limit != 0
    if limited.any():
        quantile = ndtri(data.confidence)
        sigma = np.where(data.limit > 0, hi, lo)
        sigma = np.where(np.isnan(sigma), np.abs(observed) / quantile, sigma)
        lo, hi = np.where(limited, sigma, lo), np.where(limited, sigma, hi)
    if log_normal.any():
        lo, hi, observed = lo / observed, hi / observed, np.log(observed)
    if limited.any():
        # The measurement behind the limit: L − z_C σ (upper), L + z_C σ (lower).
        observed = observed - data.limit * quantile * np.where(limited, hi, 0.0)
    return observed, lo, hi, log_normal, poisson, data.limit
