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

A data set may besides have a covariance (`fogline.likelihood.correlated`), the tails of Student's t
in place of normal ones, and nuisance parameters (`fogline.nuisances`): a scale that multiplies
its predictions, and an extra scatter that is added to its errors in quadrature. Every kind of
row is a `Part`; a new kind is one more.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from fogline.datasets import EXPOSURE, INTENSITY, MEASURED, SHOWN, DataSet
from fogline.likelihood.base import Array, Indices, Mask, Part, RowData
from fogline.likelihood.correlated import CorrelatedRows
from fogline.likelihood.process import ProcessRows, ShownRows
from fogline.likelihood.rows import CountRows, LimitRows, NormalRows, StudentRows
from fogline.nuisances import RowNuisances

__all__ = ["Likelihood"]


@dataclass(frozen=True)
class Likelihood:
    """Likelihood of the concatenated rows of all data sets.

    Parameters
    ----------
    rows : RowData
        The data.
    parts : tuple of Part
        Every row belongs to one of them.
    nuisances : RowNuisances
        Which nuisance parameters act on which rows.
    """

    rows: RowData
    parts: tuple[Part, ...]
    nuisances: RowNuisances

    @classmethod
    def from_datasets(cls, datasets: Sequence[DataSet]) -> Likelihood:
        """Return the likelihood of data sets, their rows one after the other."""
        rows = RowData.from_datasets(datasets)
        return cls(rows, _parts(rows, datasets), RowNuisances.of(datasets))

    @property
    def observed(self) -> Array:
        """Data in their own space (ln for log-normal rows), shape (n_rows,)."""
        return self.rows.observed

    @property
    def limit(self) -> Indices:
        """+1 for upper limits, -1 for lower ones, 0 for other rows."""
        return self.rows.limit

    @cached_property
    def _logged(self) -> Indices:
        return np.flatnonzero(self.rows.log_normal)

    def ln_rows(self, predicted: Array, nuisances: Array | None = None) -> Array:
        """Return ln p of every row.

        Parameters
        ----------
        predicted : ndarray, shape (n, n_rows)
            In each file's convention, nuisance scales not applied.
        nuisances : ndarray, shape (n, n_nuisances), optional
            Values in the order of `nuisances`; scales of 1 and no scatter by default.

        Returns
        -------
        ndarray, shape (n, n_rows)
            Along the eigenvectors of the covariance where a data set has one.
        """
        out = np.empty_like(predicted)
        model, scatter = self._at(predicted, nuisances)
        for part in self.parts:
            out[:, part.rows] = part.ln_rows(model, scatter)
        return out

    def ln_total(self, predicted: Array, nuisances: Array | None = None) -> Array:
        """Return ln p of all rows together, shape (n,); arguments as in `ln_rows`."""
        model, scatter = self._at(predicted, nuisances)
        total = np.zeros(len(predicted))
        for part in self.parts:
            total += part.ln_rows(model, scatter).sum(axis=1)
        return total

    def standardize(self, data: Array, predicted: Array, nuisances: Array | None = None) -> Array:
        """Return pulls, (data − predicted) / σ, with the σ of the prediction's side.

        Parameters
        ----------
        data : ndarray, shape (..., n_rows)
            Observed or replicated, as `observed` (ln for log-normal rows).
        predicted : ndarray, shape (n, n_rows)
            Predictions in the file's convention.
        nuisances : ndarray, shape (n, n_nuisances), optional

        Returns
        -------
        ndarray, shape (n, n_rows)
            For counts (n − μ) / √μ; whitened where a data set has a covariance.
        """
        model, scatter = self._at(predicted, nuisances)
        data = np.broadcast_to(data, model.shape)
        out = np.empty(model.shape)
        for part in self.parts:
            out[..., part.rows] = part.standardize(data, model, scatter)
        return out

    def replicate(
        self, predicted: Array, rng: np.random.Generator, nuisances: Array | None = None
    ) -> Array:
        """Draw replicated data from the distribution of every row (`in_data_space`).

        Parameters
        ----------
        predicted : ndarray, shape (n, n_rows)
        rng : numpy.random.Generator
        nuisances : ndarray, shape (n, n_nuisances), optional

        Returns
        -------
        ndarray, shape (n, n_rows)
        """
        model, scatter = self._at(predicted, nuisances)
        out = np.empty_like(model)
        for part in self.parts:
            out[:, part.rows] = part.replicate(model, scatter, rng)
        return out

    def ln_conditional(self, predicted: Array, nuisances: Array | None = None) -> Array:
        """Return ln p of every row given the others of its data set, shape (n, n_rows).

        Other than in `ln_rows` only where a data set has a covariance; arguments as there.
        """
        out = np.empty_like(predicted)
        model, scatter = self._at(predicted, nuisances)
        for part in self.parts:
            out[:, part.rows] = part.ln_conditional(model, scatter)
        return out

    def tails(self, predicted: Array, nuisances: Array | None = None) -> tuple[Array, Array]:
        """Return the chances that a row, given the others, falls below its datum, and on it.

        Parameters
        ----------
        predicted : ndarray, shape (n, n_rows)
        nuisances : ndarray, shape (n, n_nuisances), optional

        Returns
        -------
        below, at : ndarray, shape (n, n_rows)
            `at` is zero but for counts.
        """
        below, at = np.empty_like(predicted), np.empty_like(predicted)
        model, scatter = self._at(predicted, nuisances)
        for part in self.parts:
            below[:, part.rows], at[:, part.rows] = part.tails(model, scatter)
        return below, at

    def scaled(self, predicted: Array, nuisances: Array | None = None) -> Array:
        """Return predictions with the nuisance scales applied, in each file's convention."""
        return self.nuisances.scaled(predicted, nuisances)

    def in_data_space(self, predicted: Array) -> Array:
        """Return predictions with log-normal rows in ln."""
        if not len(self._logged):
            return predicted
        predicted = predicted.copy()
        predicted[..., self._logged] = np.log(predicted[..., self._logged])
        return predicted

    def in_file_space(self, data: Array) -> Array:
        """Return data of `in_data_space` in the file's convention; the inverse."""
        logged = self.rows.log_normal
        return np.where(logged, np.exp(np.where(logged, data, 0.0)), data)

    def _at(self, predicted: Array, nuisances: Array | None) -> tuple[Array, Array | None]:
        """Return the model in the data's space, and the scatter of all rows."""
        model = self.in_data_space(self.nuisances.scaled(predicted, nuisances))
        return model, self.nuisances.scatter(nuisances)


def _parts(rows: RowData, datasets: Sequence[DataSet]) -> tuple[Part, ...]:
    """Return the parts that share out all rows."""
    correlated, taken = _correlated(rows, datasets)
    limited = rows.limit != 0
    process = (rows.role == INTENSITY) | (rows.role == EXPOSURE)
    measured = ~rows.poisson & ~limited & ~taken & ~process
    heavy = np.isfinite(rows.student_dof)
    kinds = (
        (NormalRows, measured & ~heavy),
        (StudentRows, measured & heavy),
        (CountRows, rows.poisson & (rows.role == MEASURED)),
        (ShownRows, rows.role == SHOWN),
        (ProcessRows, process),
        (LimitRows, limited),
    )
    single: list[Part] = [kind(rows, np.flatnonzero(mask)) for kind, mask in kinds if mask.any()]
    return (*single, *correlated)


def _correlated(rows: RowData, datasets: Sequence[DataSet]) -> tuple[list[CorrelatedRows], Mask]:
    """Return the parts of data sets with a covariance, and which rows they take."""
    parts = []
    taken = np.zeros(len(rows.observed), dtype=bool)
    end = 0
    for data in datasets:
        start, end = end, end + data.n_rows
        if data.covariance is None:
            continue
        # In ln y for log-normal rows, as the errors.
        scale = np.where(rows.log_normal[start:end], data.observed, 1.0)
        covariance = data.covariance / np.outer(scale, scale)
        parts.append(CorrelatedRows(rows, np.arange(start, end), covariance))
        taken[start:end] = True
    return parts, taken
