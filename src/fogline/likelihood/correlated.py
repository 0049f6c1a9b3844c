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
from scipy.special import gammaln, ndtr, stdtr

from fogline.likelihood.base import Array, Indices, RowData
from fogline.likelihood.rows import LN_ROOT_2PI, ln_student


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

    def ln_conditional(self, model: Array, scatter: Array | None) -> Array:
        """Return ln p of each row given the others of the data set, shape (n, k)."""
        pull, precision, dof = self._given_others(model, scatter)
        jacobian = self._jacobian - 0.5 * np.log(precision)
        if np.isfinite(dof):
            return np.asarray(ln_student(pull, np.asarray(dof)) - jacobian)
        return np.asarray(-0.5 * pull**2 - LN_ROOT_2PI - jacobian)

    def tails(self, model: Array, scatter: Array | None) -> tuple[Array, Array]:
        """Return P(y < datum), given the other rows, and zeros, each (n, k)."""
        pull, _, dof = self._given_others(model, scatter)
        below = stdtr(dof, pull) if np.isfinite(dof) else ndtr(pull)
        return np.asarray(below), np.zeros_like(pull)

    def _given_others(self, model: Array, scatter: Array | None) -> tuple[Array, Array, float]:
        """Return pulls and precisions of the rows given the others, and degrees of freedom.

        With Q the inverse covariance, (Q r)_i / √Q_ii is the pull of row i given the others
        (Bürkner, Gabry & Vehtari 2021, Computational Statistics 36, 1243); a Student-t of ν
        degrees keeps ν + k - 1 of them and takes a scale from how far out the others are.
        """
        vectors = self._eigen[1]
        weight = np.broadcast_to(1.0 / self._variances(scatter), (len(model), len(self.rows)))
        along = (self.data.observed[self.rows] - model[:, self.rows]) @ vectors
        precision = weight @ (vectors**2).T
        pull = (along * weight) @ vectors.T / np.sqrt(precision)
        dof, k = float(self.data.student_dof[self.rows[0]]), len(self.rows)
        if not np.isfinite(dof):
            return pull, precision, dof
        others = (along**2 * weight).sum(axis=1, keepdims=True) - pull**2
        scale = (dof + others) / (dof + k - 1.0)
        return pull / np.sqrt(scale), precision / scale, dof + k - 1.0
