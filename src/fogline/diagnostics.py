"""Numbers that judge chains: split R-hat, effective sample sizes, autocorrelation times.

R-hat is rank-normalised and split, the larger of bulk and folded (Vehtari et al. 2021, Bayesian
Analysis 16, 667); R-hat and effective sample sizes are arviz-stats' own, fed with ranks that are
computed once. Chains are laid out as ``(n_stored, n_walkers)`` per parameter.

A walker's own chain is too short for an R-hat of its own: with n draws of autocorrelation time tau
it is 1 + tau / n at perfect convergence. Walkers are therefore pooled into groups, each a chain.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.fft import irfft, next_fast_len, rfft
from scipy.special import ndtri
from scipy.stats import rankdata

Array = NDArray[np.float64]

WALKER_GROUPS: Final = 8
"""Groups of walkers compared within an ensemble."""

TAIL: Final = (0.05, 0.95)
"""Quantiles whose effective sample size is the tail's (Vehtari et al. 2021)."""

WINDOW: Final = 5.0
"""Autocorrelations are summed over this many autocorrelation times, as emcee does."""


def rank_normalise(x: Array) -> Array:
    """Return normal scores of the ranks of all values together, in the shape of `x`."""
    # Blom's offset of 3/8, as in Vehtari et al. 2021, eq. 14.
    rank = rankdata(x, method="average")
    return np.asarray(ndtri((rank - 0.375) / (x.size + 0.25)).reshape(x.shape))


def as_chains(x: Array, n_groups: int) -> Array:
    """Return time halves x groups of walkers as chains.

    Parameters
    ----------
    x : ndarray, shape (n_stored, n_walkers)
    n_groups : int
        Groups of walkers.

    Returns
    -------
    ndarray, shape (2 * n_groups, (n_stored // 2) * (n_walkers // n_groups))
    """
    half, size = len(x) // 2, x.shape[1] // n_groups
    cut = x[: 2 * half, : n_groups * size].reshape(2, half, n_groups, size)
    return cut.transpose(0, 2, 1, 3).reshape(2 * n_groups, half * size)


def split_rhat(ensembles: Sequence[Array]) -> float:
    """Return the rank-normalised split R-hat of one parameter.

    The larger of two groupings: ensembles x time halves, and the same with the walkers of each
    ensemble in `WALKER_GROUPS` groups; and the larger of bulk and folded.

    Parameters
    ----------
    ensembles : sequence of ndarray, shape (n_stored, n_walkers)
        One parameter in every ensemble, all of one shape.

    Returns
    -------
    float
    """
    x = np.stack(list(ensembles))
    if np.ptp(x) == 0.0:
        return float("inf")  # nothing ever moved: no evidence of convergence
    folded = np.abs(x - np.median(x))
    return max(_largest_rhat(rank_normalise(x)), _largest_rhat(rank_normalise(folded)))


def _largest_rhat(z: Array) -> float:
    groups = min(WALKER_GROUPS, z.shape[2])
    return max(_rhat(np.concatenate([as_chains(e, g) for e in z])) for g in (1, groups))


def _rhat(chains: Array) -> float:
    # Imported late: arviz-stats takes a second, and loading a chain does not need it.
    from arviz_stats.base import array_stats

    with np.errstate(divide="ignore", invalid="ignore"):
        value = float(array_stats.rhat(chains, method="identity"))
    return value if np.isfinite(value) else float("inf")


def effective_sizes(x: Array) -> tuple[float, float]:
    """Return bulk and tail effective sample sizes of one parameter.

    Parameters
    ----------
    x : ndarray, shape (n_stored, n_walkers)
        Walkers are chains; put the ensembles' walkers side by side.

    Returns
    -------
    tuple of float
        Bulk, tail. Zero where nothing moved.
    """
    if np.ptp(x) == 0.0 or len(x) < 8:
        return 0.0, 0.0
    from arviz_stats.base import array_stats

    def size(values: Array) -> float:
        ess = float(array_stats.ess(values.T, method="mean"))
        return ess if np.isfinite(ess) else 0.0

    low, high = np.quantile(x, TAIL)
    tail = min(size((x <= low).astype(float)), size((x <= high).astype(float)))
    return size(rank_normalise(x)), tail


def autocorrelation_times(chain: Array) -> Array:
    """Return the integrated autocorrelation time of every parameter, averaged over walkers.

    Deviations are from the mean of all walkers, not from each walker's own: a walker that stays
    somewhere else then shows as a long time instead of vanishing.

    Parameters
    ----------
    chain : ndarray, shape (n_stored, n_walkers, n_dim)

    Returns
    -------
    ndarray, shape (n_dim,) [stored draws]
        Infinite where nothing moved.
    """
    return np.array([_autocorrelation_time(chain[:, :, k]) for k in range(chain.shape[2])])


def _autocorrelation_time(x: Array) -> float:
    n = len(x)
    power = np.abs(rfft(x - x.mean(), n=next_fast_len(2 * n, real=True), axis=0)) ** 2
    covariance = irfft(power.mean(axis=1), n=next_fast_len(2 * n, real=True))[:n]
    # Pairs at lag t are n - t in number; dividing by n would hide slow decay in short chains.
    covariance = covariance / np.arange(n, 0, -1)
    if covariance[0] <= 0.0:
        return float("inf")
    times = 2.0 * np.cumsum(covariance / covariance[0]) - 1.0
    enough = np.flatnonzero(np.arange(n) >= WINDOW * times)
    # Where the sum never settles all of it counts; emcee's auto_window then takes its first term,
    # and the slowest of chains would get the shortest of times.
    return float(max(times[enough[0] if len(enough) else -1], 1.0))


def growth(chain: Array, thin: int, n_lengths: int = 5) -> list[tuple[int, float]]:
    """Return the longest autocorrelation time estimated from ever longer starts of the chain.

    Parameters
    ----------
    chain : ndarray, shape (n_stored, n_walkers, n_dim)
    thin : int
        Steps between stored draws.
    n_lengths : int, optional
        Lengths n, n/2, n/4, ...

    Returns
    -------
    list of (int, float)
        Chain length and autocorrelation time, both in steps, shortest first.
    """
    lengths = [len(chain) >> k for k in reversed(range(n_lengths)) if len(chain) >> k >= 8]
    return [(n * thin, thin * float(autocorrelation_times(chain[:n]).max())) for n in lengths]
