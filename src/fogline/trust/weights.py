"""Posterior draws that stand for another posterior: Pareto-smoothed importance weights.

Where the other posterior leaves data out, the ratio of the two is 1 / p(data left out | θ). The
largest ratios are replaced by quantiles of a generalised Pareto distribution fitted to them, whose
shape k-hat says whether the weights can be trusted at all: below 0.7 they can (Vehtari, Simpson,
Gelman, Yao & Gabry 2024, JMLR 25, 72).
"""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

GOOD_K: Final = 0.7
"""Shape k-hat below which smoothed weights are trusted."""


def smoothed_weights(ln_ratio: Array) -> tuple[Array, Array]:
    """Return smoothed, normalised ln weights and the shape of their tail.

    Parameters
    ----------
    ln_ratio : ndarray, shape (n_draws,) or (n_draws, k)
        ln of target over posterior density, up to a constant.

    Returns
    -------
    ln_weight : ndarray, shape of `ln_ratio`
        exp adds up to one along the draws.
    pareto_k : ndarray, shape () or (k,)
        -inf where all weights are alike.
    """
    # Imported late: arviz-stats takes a second.
    from arviz_stats.base import array_stats

    flat = ln_ratio.reshape(len(ln_ratio), -1)
    out, k = np.empty_like(flat), np.full(flat.shape[1], -np.inf)
    for i, column in enumerate(flat.T):
        if np.ptp(column) < 1e-9:
            out[:, i] = -np.log(len(column))
            continue
        # psislw expects ln likelihoods left out, hence the reversed sign.
        out[:, i], k[i] = array_stats.psislw(-(column - column.max()))
    return out.reshape(ln_ratio.shape), k.reshape(ln_ratio.shape[1:])


def resampled(ln_weight: Array, n_draws: int, rng: np.random.Generator) -> NDArray[np.int64]:
    """Return indices of equally weighted draws, by systematic resampling.

    Parameters
    ----------
    ln_weight : ndarray, shape (n,)
        Normalised.
    n_draws : int
    rng : numpy.random.Generator

    Returns
    -------
    ndarray of int, shape (n_draws,)
    """
    edges = np.cumsum(np.exp(ln_weight))
    at = (np.arange(n_draws) + rng.random()) / n_draws * edges[-1]
    return np.minimum(np.searchsorted(edges, at), len(ln_weight) - 1).astype(np.int64)
