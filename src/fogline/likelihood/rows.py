"""Likelihoods of independent rows: split-normal, Student-t, limits, counts."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy import stats
from scipy.special import gammaln, log_ndtr, ndtr, pdtr, stdtr, xlogy

from fogline.likelihood.base import Array, Indices, RowData

LN_ROOT_2PI = float(0.5 * np.log(2.0 * np.pi))


@dataclass(frozen=True)
class NormalRows:
    """Measurements with split-normal errors, of the value or of its logarithm."""

    data: RowData
    rows: Indices

    @cached_property
    def _inverse_sigmas(self) -> tuple[Array, Array]:
        lo, hi = self.data.sigmas(self.rows, None)
        return 1.0 / lo, 1.0 / hi

    @cached_property
    def _jacobian(self) -> Array:
        rows = self.rows
        return np.where(self.data.log_normal[rows], self.data.observed[rows], 0.0)

    @cached_property
    def _ln_norm(self) -> Array:
        return _ln_split(*self.data.sigmas(self.rows, None)) - LN_ROOT_2PI - self._jacobian

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return ln p, shape (n, k)."""
        residual = model[:, self.rows] - self.data.observed[self.rows]
        if scatter is None:
            inverse_lo, inverse_hi = self._inverse_sigmas
            ln_norm = self._ln_norm
        else:
            lo, hi = self.data.sigmas(self.rows, scatter)
            inverse_lo, inverse_hi = 1.0 / lo, 1.0 / hi
            ln_norm = _ln_split(lo, hi) - LN_ROOT_2PI - self._jacobian
        residual *= np.where(residual > 0.0, inverse_hi, inverse_lo)
        residual *= residual
        residual *= -0.5
        residual += ln_norm
        return residual

    def replicate(self, model: Array, scatter: Array | None, rng: np.random.Generator) -> Array:
        """Draw replicates, shape (n, k)."""
        return _stepped(
            model[:, self.rows], self.data.sigmas(self.rows, scatter), rng, rng.standard_normal
        )

    def standardize(self, data: Array, model: Array, scatter: Array | None) -> Array:
        """Return pulls with the σ of the prediction's side."""
        residual = data[..., self.rows] - model[..., self.rows]
        lo, hi = self.data.sigmas(self.rows, scatter)
        return np.asarray(residual / np.where(residual < 0.0, hi, lo))

    def ln_conditional(self, model: Array, scatter: Array | None) -> Array:
        """Return ln p, shape (n, k): rows are independent."""
        return self.ln_rows(model, scatter)

    def tails(self, model: Array, scatter: Array | None) -> tuple[Array, Array]:
        """Return P(y < datum) and zeros, each (n, k)."""
        pull = self.standardize(self.data.observed, model, scatter)
        lo, hi = self.data.sigmas(self.rows, scatter)
        # Each half of the density holds the share of its own error.
        share = np.where(pull < 0.0, hi, lo) * 2.0 / (lo + hi)
        half = share * self._cdf(-np.abs(pull))
        return np.where(pull < 0.0, half, 1.0 - half), np.zeros_like(half)

    def _cdf(self, pull: Array) -> Array:
        return np.asarray(ndtr(pull))


@dataclass(frozen=True)
class StudentRows(NormalRows):
    """The same with the tails of Student's t: an outlier counts for less."""

    @cached_property
    def _dof(self) -> Array:
        return self.data.student_dof[self.rows]

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return ln p, shape (n, k)."""
        residual = model[:, self.rows] - self.data.observed[self.rows]
        lo, hi = self.data.sigmas(self.rows, scatter)
        pull = residual / np.where(residual > 0.0, hi, lo)
        return np.asarray(ln_student(pull, self._dof) + _ln_split(lo, hi) - self._jacobian)

    def replicate(self, model: Array, scatter: Array | None, rng: np.random.Generator) -> Array:
        """Draw replicates, shape (n, k)."""

        def draw(shape: tuple[int, ...]) -> Array:
            return rng.standard_t(self._dof, shape)

        return _stepped(model[:, self.rows], self.data.sigmas(self.rows, scatter), rng, draw)

    def _cdf(self, pull: Array) -> Array:
        return np.asarray(stdtr(self._dof, pull))


@dataclass(frozen=True)
class LimitRows:
    """Limits: the probability of a measurement at or beyond the one made."""

    data: RowData
    rows: Indices

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return ln P, shape (n, k)."""
        gap = self.data.limit[self.rows] * self._gap(self.data.observed, model, scatter)
        dof = self.data.student_dof[self.rows]
        heavy = np.isfinite(dof)
        if not heavy.any():
            return np.asarray(log_ndtr(gap))
        ln_p = np.empty_like(gap)
        ln_p[:, ~heavy] = log_ndtr(gap[:, ~heavy])
        ln_p[:, heavy] = stats.t.logcdf(gap[:, heavy], dof[heavy])
        return ln_p

    def replicate(self, model: Array, scatter: Array | None, rng: np.random.Generator) -> Array:
        """Draw the measurements behind limits, shape (n, k)."""
        sigma = self.data.sigmas(self.rows, scatter)[1]
        noise = rng.standard_normal((len(model), len(self.rows)))
        dof = self.data.student_dof[self.rows]
        heavy = np.isfinite(dof)
        if heavy.any():  # Student's t is a normal over the root of a chi-square
            spread = rng.chisquare(dof[heavy], (len(model), heavy.sum())) / dof[heavy]
            noise[:, heavy] /= np.sqrt(spread)
        return np.asarray(model[:, self.rows] + sigma * noise)

    def standardize(self, data: Array, model: Array, scatter: Array | None) -> Array:
        """Return pulls of the measurements behind limits."""
        return self._gap(data, model, scatter)

    def ln_conditional(self, model: Array, scatter: Array | None) -> Array:
        """Return ln P, shape (n, k): rows are independent."""
        return self.ln_rows(model, scatter)

    def tails(self, model: Array, scatter: Array | None) -> tuple[Array, Array]:
        """Return P(y < measurement behind the limit) and zeros, each (n, k)."""
        ln_p = self.ln_rows(model, scatter)
        p = np.exp(ln_p)
        return np.where(self.data.limit[self.rows] > 0, p, 1.0 - p), np.zeros_like(p)

    def _gap(self, data: Array, model: Array, scatter: Array | None) -> Array:
        sigma = self.data.sigmas(self.rows, scatter)[1]
        return np.asarray((data[..., self.rows] - model[..., self.rows]) / sigma)


@dataclass(frozen=True)
class CountRows:
    """Counts, which are Poisson."""

    data: RowData
    rows: Indices

    @cached_property
    def _ln_factorial(self) -> Array:
        return np.asarray(gammaln(self.data.observed[self.rows] + 1.0))

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return ln p, shape (n, k)."""
        mean = model[:, self.rows]
        return np.asarray(xlogy(self.data.observed[self.rows], mean) - mean - self._ln_factorial)

    def replicate(self, model: Array, scatter: Array | None, rng: np.random.Generator) -> Array:
        """Draw counts, shape (n, k)."""
        return rng.poisson(model[:, self.rows]).astype(float)

    def standardize(self, data: Array, model: Array, scatter: Array | None) -> Array:
        """Return (n − μ) / √μ."""
        mean = model[..., self.rows]
        return np.asarray((data[..., self.rows] - mean) / np.sqrt(mean))

    def ln_conditional(self, model: Array, scatter: Array | None) -> Array:
        """Return ln p, shape (n, k): rows are independent."""
        return self.ln_rows(model, scatter)

    def tails(self, model: Array, scatter: Array | None) -> tuple[Array, Array]:
        """Return P(n < count) and P(n = count), each (n, k)."""
        count, mean = self.data.observed[self.rows], model[:, self.rows]
        at_most = pdtr(count, mean)
        below = np.where(count > 0.0, pdtr(np.maximum(count - 1.0, 0.0), mean), 0.0)
        return below, at_most - below


def ln_student(x: Array, dof: Array) -> Array:
    """Return ln of Student's t density; `scipy.stats.t.logpdf` without its checks."""
    half = 0.5 * dof
    norm = gammaln(half + 0.5) - gammaln(half) - 0.5 * np.log(np.pi * dof)
    return np.asarray(norm - (half + 0.5) * np.log1p(x * x / dof))


def _ln_split(lo: Array, hi: Array) -> Array:
    """Return ln of what joins two half densities of unit scale into one density."""
    return np.asarray(np.log(2.0 / (lo + hi)))


def _stepped(
    model: Array,
    sigmas: tuple[Array, Array],
    rng: np.random.Generator,
    draw: Callable[[tuple[int, ...]], Array],
) -> Array:
    lo, hi = sigmas
    # p(y | m) as a density in y: below m the datum's upper error is the one that counts.
    below = rng.random(model.shape) * (lo + hi) < hi
    return np.asarray(model + np.abs(draw(model.shape)) * np.where(below, -hi, lo))
