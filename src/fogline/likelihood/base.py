"""What the likelihoods of single kinds of rows share: their data, and the protocol they obey."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from fogline.datasets import SHOWN, DataSet

Array = NDArray[np.float64]
Indices = NDArray[np.int64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True)
class RowData:
    """The rows of all data sets, one after the other.

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
    student_dof : ndarray, shape (n_rows,)
        Degrees of freedom of Student-t rows, infinite for normal ones.
    role : ndarray of int, shape (n_rows,)
        Roles of `fogline.datasets`.
    """

    observed: Array
    sigma_lo: Array
    sigma_hi: Array
    log_normal: Mask
    poisson: Mask
    limit: Indices
    student_dof: Array
    role: Indices

    @classmethod
    def from_datasets(cls, datasets: Sequence[DataSet]) -> RowData:
        """Return the rows of data sets in order."""
        parts = [_rows(data) for data in datasets]
        names = [field.name for field in fields(cls)]
        return cls(**{name: np.concatenate([getattr(p, name) for p in parts]) for name in names})

    def sigmas(self, rows: Indices, scatter: Array | None) -> tuple[Array, Array]:
        """Return the errors of rows with extra scatter added in quadrature.

        Parameters
        ----------
        rows : ndarray of int, shape (k,)
        scatter : ndarray, shape (n, n_rows), or None

        Returns
        -------
        lo, hi : ndarray, shape (n, k) or (k,)
        """
        lo, hi = self.sigma_lo[rows], self.sigma_hi[rows]
        if scatter is None:
            return lo, hi
        return np.hypot(lo, scatter[:, rows]), np.hypot(hi, scatter[:, rows])


class Part(Protocol):
    """The likelihood of rows of one kind.

    ``model`` is what `Likelihood.in_data_space` makes of predictions, of all rows; ``scatter`` is
    the extra scatter of all rows, shape (n, n_rows), or None where no data set has any.
    """

    @property
    def rows(self) -> Indices:
        """The rows that it speaks for."""
        ...

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return ln p of its rows, shape (n, k)."""
        ...

    def replicate(self, model: Array, scatter: Array | None, rng: np.random.Generator) -> Array:
        """Draw replicated data of its rows, shape (n, k)."""
        ...

    def standardize(self, data: Array, model: Array, scatter: Array | None) -> Array:
        """Return (data − model) / σ of its rows, shape (..., k)."""
        ...

    def ln_conditional(self, model: Array, scatter: Array | None) -> Array:
        """Return ln p of each row given the others of its data set, shape (n, k)."""
        ...

    def tails(self, model: Array, scatter: Array | None) -> tuple[Array, Array]:
        """Return the chances that a row, given the others, falls below its datum, and on it."""
        ...


def _rows(data: DataSet) -> RowData:
    """Return the rows of one data set."""
    if data.role is not None:
        return _process_rows(data, data.role)
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
    dof = np.full(data.n_rows, float(data.meta.get("student_dof") or np.inf))
    role = np.zeros(data.n_rows, dtype=np.int64)
    return RowData(observed, lo, hi, log_normal, poisson, data.limit, dof, role)


def _process_rows(data: DataSet, role: Indices) -> RowData:
    """Return the rows of a list of absorbers, which have neither errors nor limits."""
    shown = role == SHOWN
    none = np.full(data.n_rows, np.nan)
    no, zero = np.zeros_like(shown), np.zeros_like(role)
    normal = np.full(data.n_rows, np.inf)
    return RowData(data.observed, none, none, no, shown, zero, normal, role)
