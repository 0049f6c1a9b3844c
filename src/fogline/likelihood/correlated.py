"""Measurements whose errors are correlated: one multivariate density a data set.

With covariance C = V diag(λ) Vᵀ, extra scatter x and residual r = m − y::

    C + x² 1 = V diag(λ + x²) Vᵀ,      q = Σ (Vᵀ r)² / (λ + x²)
    ln p = −½ q − ½ Σ ln(λ + x²) − (k/2) ln 2π

and, with ν degrees of freedom, the multivariate Student-t of the same q and scale matrix. Rows are
told apart along the eigenvectors: an entry of `ln_rows` is the share of one eigenvector, and only
the sum over the data set is a likelihood of data.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.special import gammaln

from fogline.likelihood.base import Array, Indices, RowData
from fogline.likelihood.rows import LN_ROOT_2PI


@dataclass(frozen=True)
class CorrelatedRows:
    """All rows of a data set that states a covariance.

    Parameters
    ----------
    data : RowData
    rows : ndarray of int, shape (k,)
    covariance : ndarray, shape (k, k)
        Positive definite, in the square of the data's own space.
    """

    data: RowData
    rows: Indices
    covariance: Array

    @cached_property
    def _eigen(self) -> tuple[Array, Array]:
        values, vectors = np.linalg.eigh(self.covariance)
        return values, vectors

    @cached_property
    def _jacobian(self) -> Array:
        rows = self.rows
        return np.where(self.data.log_normal[rows], self.data.observed[rows], 0.0)

    def _variances(self, scatter: Array | None) -> Array:
        values, _ = self._eigen
        if scatter is None:
            return values
        # One scatter a data set: the same in all of its rows.
        return values + scatter[:, self.rows[:1]] ** 2

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return the share of every eigenvector in ln p, shape (n, k)."""
        residual = model[:, self.rows] - self.data.observed[self.rows]
        # An infinite prediction fits no datum; in the product it would become NaN.
        beyond = np.isinf(residual).any(axis=1, keepdims=True)
        residual = np.where(beyond, 0.0, residual) @ self._eigen[1]
        variances = self._variances(scatter)
        with np.errstate(over="ignore"):
            squares = residual**2 / variances
        shares = -0.5 * np.log(variances) - LN_ROOT_2PI - self._jacobian
        dof, k = float(self.data.student_dof[self.rows[0]]), len(self.rows)
        if np.isfinite(dof):
            total = squares.sum(axis=1, keepdims=True)
            norm = gammaln(0.5 * (dof + k)) - gammaln(0.5 * dof) - 0.5 * k * np.log(0.5 * dof)
            joint = norm - 0.5 * (dof + k) * np.log1p(total / dof)
            shares = shares + joint / k
        else:
            shares = shares - 0.5 * squares
        return np.where(beyond, -np.inf, shares)

    def replicate(self, model: Array, scatter: Array | None, rng: np.random.Generator) -> Array:
        """Draw replicates, shape (n, k)."""
        dof = float(self.data.student_dof[self.rows[0]])
        noise = rng.standard_normal((len(model), len(self.rows)))
        noise *= np.sqrt(self._variances(scatter))
        if np.isfinite(dof):
            noise *= np.sqrt(dof / rng.chisquare(dof, (len(model), 1)))
        return np.asarray(model[:, self.rows] + noise @ self._eigen[1].T)

    def standardize(self, data: Array, model: Array, scatter: Array | None) -> Array:
        """Return whitened pulls C^(-1/2) (data − model): uncorrelated, and near their own row."""
        vectors = self._eigen[1]
        residual = (data[..., self.rows] - model[..., self.rows]) @ vectors
        # The symmetric root keeps every pull with its row as nearly as whitening can.
        return np.asarray(residual / np.sqrt(self._variances(scatter)) @ vectors.T)
