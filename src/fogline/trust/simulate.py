"""Replicated constraint data of a whole fit: what its model, if true, would have given.

Every row is drawn anew from the distribution that its likelihood is the density of, so that a fit
of the replicate obeys Bayes' theorem exactly, and ranks of the truth among its draws are uniform
(`fogline.trust.ranks`). The numbers of a replicate stand in its `DataSet` as those of a file would.

*Measurements* are replaced by `Likelihood.replicate`; their errors stay. Those of log-normal rows
are fixed in ln y, σ_ln = err/y, so err and covariance are scaled by y_rep/y_obs (for the covariance
by the product of both rows' ratios). *Counts* are new Poisson counts.

*Limits* have the likelihood P(y <= t | m) with t the measurement behind the limit (upper; the other
side for lower ones). Of y alone this is no density, and drawing a new limit each time would be
wrong: a limit can only push one way, and replicates full of them push posteriors off the truth. It
is the probability of one of two outcomes, though: with the threshold t kept as it is, y is drawn
with the row's error, and where it is at t or beyond it the row stays the same limit; where it is
not, the row becomes a measurement of y with that error. Both together have probability 1, which
is what calibration needs. (A survey whose threshold were elsewhere in each trial would have other
limits; no row says so.)

*Lists of absorbers* are drawn as the process of `fogline.quantities.absorber_list`: a Poisson
number of true (N, z) with intensity ∫ g (dX/dz) f C dN dz, errors of the list's own, a
measured column from them, and whatever falls into the list's range is kept; then the new list is
reduced as one that is read. None of the model's own integrals of selection is used. Four choices:

* Redshifts are those of the path's nodes, drawn by weight. The data set holds no others, and the
  nodes are the path as far as its expected number goes (the same moments); with these the list is
  exactly one of the model's process.
* Errors are drawn from the representatives, whatever column or redshift, as the model's selection
  takes them; the same representatives stand for the replicate.
* Lower bounds: the list's share of bounds among the absorbers above their mean bound is kept. An
  absorber measured above it is a bound, at that column, with this probability, else a measurement.
  Which it is does not depend on the truth, and the constant factor drops out. (Exact for symmetric
  errors, and as long as the list has no upper end that bounds could lie beyond.)
* Paths that end at thick absorbers stay as the data cut them. A Poisson process on them has
  the same likelihood; that the path itself would differ from trial to trial is left out.

Bins that are shown keep their edges.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any, Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fogline.absorber_files import Listed, list_rows
from fogline.cosmology import Cosmology
from fogline.datasets import EXPOSURE, INTENSITY, SHOWN, DataSet
from fogline.distribution import LN10, ColumnDistribution
from fogline.likelihood import Likelihood
from fogline.quantities.absorber_list import REACH, completeness
from fogline.response import Response
from fogline.response_file import Fit

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

CELL: Final = 0.004
"""Width of cells in log N from which true columns are drawn [dex]. Within one, f N varies by
about 1%, and columns are taken as equally likely."""

MOST_AT_ONCE: Final = 1_000_000
"""True absorbers that are drawn at once: bounds the memory."""


def simulate(
    fit: Fit | Response,
    theta: ArrayLike,
    rng: np.random.Generator,
    *,
    cosmology: Cosmology | None = None,
) -> tuple[DataSet, ...]:
    """Return replicated data sets of a fit at given parameters.

    Parameters
    ----------
    fit : Fit or Response
    theta : array_like, shape (n_parameters,)
        Nuisance parameters included, which are neutral where `theta` ends before them.
    rng : numpy.random.Generator
    cosmology : Cosmology, optional
        Of the results; from the fit where it is one. Lists of absorbers need it.

    Returns
    -------
    tuple of DataSet
        In order. The response of a list depends on its absorbers and must be built anew; that of
        others stays.

    Raises
    ------
    ValueError
        Where `theta` is no single vector of parameters, where a measurement is predicted to be
        infinite or not to be a number, or where a list has no cosmology.
    """
    response = fit.response if isinstance(fit, Fit) else fit
    cosmology = fit.setting.cosmology if isinstance(fit, Fit) else cosmology
    theta = np.asarray(theta, dtype=float)
    if theta.ndim != 1 or len(theta) < response.n_parameters:
        what = f"theta has the shape {theta.shape}, must be one vector of at least"
        raise ValueError(f"{what} {response.n_parameters} parameters")
    likelihood = Likelihood.from_datasets(response.datasets)
    nuisances = theta[None, response.n_parameters :]
    values = nuisances if nuisances.size else None
    predicted = response.predict(theta[None])
    factors = likelihood.scaled(np.ones_like(predicted), values)[0]
    drawn = _Drawn.of(likelihood, predicted, values, rng)
    out = []
    for data, rows in zip(response.datasets, response.slices, strict=True):
        if data.role is None:
            out.append(_measured_again(data, drawn.at(rows)))
            continue
        if cosmology is None:
            raise ValueError(f"{data.name} is a list of absorbers, and needs a cosmology")
        process = _Process(data, response.distribution, cosmology)
        out.append(process.draw(theta, float(factors[rows.start]), rng))
    return tuple(out)


# Rows that are drawn by their likelihood


@dataclass(frozen=True)
class _Drawn:
    """Replicates of rows in the likelihood's and in the file's space, each of shape (n_rows,).

    Parameters
    ----------
    value : ndarray
        Drawn, in the file's convention.
    sigma : ndarray
        Error of the measurement behind a limit, in the likelihood's space.
    stays : ndarray of bool
        Limits that the drawn measurement does not contradict.
    log_normal : ndarray of bool
    """

    value: Array
    sigma: Array
    stays: Mask
    log_normal: Mask

    @classmethod
    def of(
        cls,
        likelihood: Likelihood,
        predicted: Array,
        nuisances: Array | None,
        rng: np.random.Generator,
    ) -> _Drawn:
        with np.errstate(divide="ignore"):  # ln 0 is far from any datum
            drawn = likelihood.replicate(predicted, rng, nuisances)[0]
        rows, made = likelihood.rows, likelihood.observed
        upper, lower = rows.limit > 0, rows.limit < 0
        return cls(
            likelihood.in_file_space(drawn),
            rows.sigma_hi,
            (upper & (drawn <= made)) | (lower & (drawn >= made)),
            rows.log_normal,
        )

    def at(self, rows: slice) -> _Drawn:
        """Return some of the rows."""
        return _Drawn(self.value[rows], self.sigma[rows], self.stays[rows], self.log_normal[rows])


def _measured_again(data: DataSet, drawn: _Drawn) -> DataSet:
    """Return a data set with drawn measurements, counts, and limits."""
    observed = np.where(drawn.stays, data.observed, drawn.value)
    bad = ~np.isfinite(observed) | (drawn.log_normal & (observed <= 0.0))
    if bad.any():
        row = int(bad.argmax())
        raise ValueError(f"{data.name}: the replicate of row {row} is {observed[row]}")
    ratio = np.divide(observed, data.observed, out=np.ones(data.n_rows), where=drawn.log_normal)
    # A limit that has become a measurement has one error, in ln y where it is log-normal.
    found = (data.limit != 0) & ~drawn.stays
    error = drawn.sigma * np.where(drawn.log_normal, observed, 1.0)
    covariance = data.covariance
    return replace(
        data,
        observed=observed,
        err_lo=np.where(found, error, ratio * data.err_lo),
        err_hi=np.where(found, error, ratio * data.err_hi),
        limit=np.where(found, 0, data.limit),
        covariance=None if covariance is None else covariance * np.outer(ratio, ratio),
    )


# Lists of absorbers


@dataclass(frozen=True)
class _Process:
    """The Poisson process behind a list of absorbers."""

    data: DataSet
    distribution: ColumnDistribution
    cosmology: Cosmology

    @property
    def _range(self) -> tuple[float, float]:
        """Measured columns that the list holds."""
        return float(self.data.meta["log_nhi_min"]), float(
            self.data.meta.get("log_nhi_max") or np.inf
        )

    def draw(self, theta: Array, factor: float, rng: np.random.Generator) -> DataSet:
        """Return the data set of a new list.

        Parameters
        ----------
        theta : ndarray, shape (n_parameters or more,)
        factor : float
            Scale of the intensity, a nuisance parameter.
        rng : numpy.random.Generator
        """
        edges, expected = self._expected(theta)
        expected = factor * expected
        n_true = int(rng.poisson(expected.sum()))
        chances = (expected / expected.sum()).ravel() if n_true else np.ones(expected.size)
        cumulative = np.cumsum(chances) / chances.sum()
        parts = [
            self._measured(edges, cumulative, min(MOST_AT_ONCE, n_true - start), rng)
            for start in range(0, n_true, MOST_AT_ONCE)
        ]
        columns = np.concatenate(parts, axis=1) if parts else np.empty((4, 0))
        return self._reduced(self._bounded(*columns, rng=rng))

    def _expected(self, theta: Array) -> tuple[Array, Array]:
        """Return edges of cells in log N, and true absorbers expected, (n_nodes, n_cells)."""
        lo, hi = self.data.extras["errors_lo"], self.data.extras["errors_hi"]
        first, last = self.distribution.column_range
        widest = float(max(lo.max(), hi.max()))
        start = min(max(first, self._range[0] - REACH * widest), last - 1e-3)
        kinks = [kink for kink in self.distribution.kinks if start < kink < last]
        n_cells = int(np.ceil((last - start) / CELL))
        edges = np.unique([*np.linspace(start, last, n_cells + 1), *kinks])
        middle = 0.5 * (edges[1:] + edges[:-1])
        at = np.stack([edges[:-1], middle, edges[1:]])
        seen = completeness(self.data, at.ravel()) * LN10 * 10.0 ** at.ravel()
        path = zip(self.data.extras["path_z"], self.data.extras["path_weight"], strict=True)
        rows = []
        for z, weight in path:
            f = 10.0 ** self.distribution.log_f(theta, at.ravel(), float(z))
            left, centre, right = (f * seen).reshape(at.shape)
            mean = (left + 4.0 * centre + right) / 6.0  # Simpson's rule
            rows.append(float(weight * self.cosmology.dx_dz(z)) * mean * np.diff(edges))
        return edges, np.stack(rows)

    def _measured(self, edges: Array, cumulative: Array, n: int, rng: np.random.Generator) -> Array:
        """Return z, measured log N, lower and upper error of those in the range, (4, n_kept)."""
        n_cells = len(edges) - 1
        drawn = np.minimum(np.searchsorted(cumulative, rng.random(n)), len(cumulative) - 1)
        node, cell = np.divmod(drawn, n_cells)
        true = edges[cell] + rng.random(n) * np.diff(edges)[cell]
        pair = rng.integers(len(self.data.extras["errors_lo"]), size=n)
        lo, hi = self.data.extras["errors_lo"][pair], self.data.extras["errors_hi"][pair]
        # A measurement below the truth has its upper error, as in `fogline.absorbers.errors`.
        under = rng.random(n) * (lo + hi) < hi
        measured = true + np.abs(rng.standard_normal(n)) * np.where(under, -hi, lo)
        least, most = self._range
        kept = (measured >= least) & (measured < most)
        return np.stack([self.data.extras["path_z"][node], measured, lo, hi])[:, kept]

    def _bounded(
        self, z: Array, log_nhi: Array, lo: Array, hi: Array, *, rng: np.random.Generator
    ) -> Listed:
        """Return the list with as many lower bounds as the data have."""
        bound_at, share = self._bounds()
        bound = (log_nhi > bound_at) & (rng.random(len(z)) < share)
        return Listed(z, np.where(bound, bound_at, log_nhi), lo, hi, bound)

    def _bounds(self) -> tuple[float, float]:
        """Return the column of bounds, and which share of absorbers above it are bounds."""
        data = self.data
        cells = data.role == INTENSITY
        bound = cells & (data.limit != 0)
        # Rows are shared out among cells with weights that keep numbers and mean columns.
        n_bound = float(data.observed[bound].sum())
        if n_bound < 0.5:
            return np.inf, 0.0
        mean = float(data.observed[bound] @ data.log_nhi_lo[bound]) / n_bound
        at = max(mean, self._range[0])
        others = float(data.observed[cells & ~bound & (data.log_nhi_lo > at)].sum())
        return at, n_bound / (n_bound + max(others, 0.0))

    def _reduced(self, listed: Listed) -> DataSet:
        data = self.data
        shown = np.flatnonzero(data.role == SHOWN)
        edges = np.append(data.log_nhi_lo[shown], data.log_nhi_hi[shown[-1:]])
        # Without an upper end the bins end at the strongest absorber of the data; what is beyond
        # is in the list but in no bin, as in the prediction of the bins.
        counts = np.histogram(listed.log_nhi, edges)[0]
        path = np.flatnonzero(data.role == EXPOSURE)[0]
        span = float(data.z_lo[path]), float(data.z_hi[path])
        rows: dict[str, Any] = list_rows(listed, edges, counts, span)
        extras = {**data.extras, "n_absorbers": np.array(float(len(listed.z)))}
        return replace(data, **rows, extras=extras)
