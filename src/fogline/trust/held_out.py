"""How badly data that a fit has not seen disagree with what it predicts for them.

For every draw of the fit, replicated data are drawn from the likelihood. Each row is scaled by the
median and the half-width of its replicates, u; R is the correlation of the replicates (of their
normal scores: predictions share the uncertainty of the fit). Then

    T = uᵀ R⁻¹ u,            p = P(T_rep ≥ T_obs)
    b = 1ᵀ R⁻¹ u / √(1ᵀ R⁻¹ 1)

T is a χ² in shape and p needs no such assumption: observed and replicated data are treated alike,
so that p is uniform where the fit and the errors hold. b is the common offset of the rows, in σ,
positive where data lie above their prediction. Where fewer than ten replicates are as far out as
the data, p comes from a gamma distribution with the mean and variance of the replicates' T.
Limits count on their own side only.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy import stats
from scipy.special import ndtri

from fogline.datasets import DataSet
from fogline.likelihood import Likelihood
from fogline.response import Response
from fogline.trust.discrepancies import sigma_of

Array = NDArray[np.float64]

ENOUGH: Final = 10
"""Replicates as far out as the data from which on their share is the p-value."""

FARTHEST: Final = 30.0
"""Scaled residuals end here: a free path beyond reach must not become NaN."""

RIDGE: Final = 1e-3
"""Added to the correlation's diagonal: rows that predictions tie together fully stay solvable."""


@dataclass(frozen=True)
class HeldOut:
    """Data against what a fit without them predicts.

    Parameters
    ----------
    n_rows : int
    discrepancy, p_value, offset : float
        T, p and b.
    extrapolated : bool
        Whether p comes from the gamma tail.
    """

    n_rows: int
    discrepancy: float
    p_value: float
    offset: float
    extrapolated: bool

    @property
    def sigma(self) -> float:
        """Normal equivalent of p."""
        return sigma_of(self.p_value)


def held_out(response: Response, theta: Array, rng: np.random.Generator) -> HeldOut:
    """Compare data with the predictions of a fit that has not seen them.

    Parameters
    ----------
    response : Response
        Of the data left out.
    theta : ndarray, shape (n_draws, n_parameters)
        Draws of the fit without them, with the nuisance parameters of `response` last.
    rng : numpy.random.Generator
    """
    likelihood = Likelihood.from_datasets(response.datasets)
    predicted, nuisances = response.predict(theta), theta[:, response.n_parameters :]
    kept = np.flatnonzero(_counted(response.datasets))
    replicates = likelihood.replicate(predicted, rng, nuisances)[:, kept]
    observed, limit = likelihood.observed[kept], likelihood.limit[kept]
    low, middle, high = np.quantile(replicates, (0.16, 0.5, 0.84), axis=0, method="inverted_cdf")
    width = 0.5 * (high - low)
    # Low counts may all fall on one number.
    width = np.where(np.isfinite(width) & (width > 0.0), width, np.sqrt(np.maximum(middle, 1.0)))
    inverse = np.linalg.inv(_correlation(replicates, rng) + RIDGE * np.eye(len(kept)))

    def scaled(data: Array) -> Array:
        with np.errstate(invalid="ignore"):
            u = np.nan_to_num((data - middle) / width, nan=0.0)
        u = np.clip(u, -FARTHEST, FARTHEST)
        u = np.where(limit > 0, np.minimum(u, 0.0), u)
        return np.asarray(np.where(limit < 0, np.maximum(u, 0.0), u))

    u, u_rep = scaled(observed), scaled(replicates)
    found = float(u @ inverse @ u)
    replicated = np.einsum("ni,ij,nj->n", u_rep, inverse, u_rep)
    ones = np.ones(len(kept))
    offset = float(ones @ inverse @ u / np.sqrt(ones @ inverse @ ones))
    p_value, extrapolated = _tail(found, replicated)
    return HeldOut(len(kept), found, p_value, offset, extrapolated)


def _counted(datasets: tuple[DataSet, ...]) -> NDArray[np.bool_]:
    return np.concatenate([data.visible for data in datasets])


def _correlation(replicates: Array, rng: np.random.Generator) -> Array:
    """Return the correlation of normal scores, shape (n_rows, n_rows)."""
    n = len(replicates)
    # Ties of counts are broken at random: equal ranks would have no spread.
    order = np.lexsort((rng.random(replicates.shape), replicates), axis=0)
    ranks = np.empty_like(order)
    np.put_along_axis(ranks, order, np.arange(n)[:, None], axis=0)
    scores = ndtri((ranks + 0.5) / n)
    return np.atleast_2d(np.corrcoef(scores, rowvar=False))


def _tail(found: float, replicated: Array) -> tuple[float, bool]:
    """Return P(T_rep >= T_obs), and whether it was extrapolated."""
    beyond = int(np.count_nonzero(replicated >= found))
    if beyond >= ENOUGH:
        return (1.0 + beyond) / (1.0 + len(replicated)), False
    mean, variance = float(replicated.mean()), float(replicated.var())
    p = float(stats.gamma.sf(found, mean**2 / variance, scale=variance / mean))
    # Heavier tails than a gamma's show in the replicates themselves.
    return max(p, 1e-300) if beyond == 0 else max(p, beyond / len(replicated)), True
