"""Calibration by simulation: whether posteriors of simulated data hold the truth as they say.

Draw a truth from the prior, data from the truth, and a posterior from the data. The rank r of the
truth among L independent posterior draws (the number of draws below it) is then uniform on
0 ... L, whatever prior and likelihood are (Cook, Gelman & Rubin 2006, J. Comput. Graph. Stat. 15,
675). Here n such ranks of each quantity are judged.

*Uniformity.* The number of ranks <= r is binomial with probability (r + 1)/(L + 1). Intervals that
hold it with probability 1 - γ at each r hold the whole curve with a lower one; γ is lowered until
that is 1 - α (Säilynoja, Bürkner & Vehtari 2022, Statistics and Computing 32, 32, section 2.3)::

    γ = α quantile of  min_r 2 min{ Bin(k_r), 1 - Bin(k_r - 1) }   over simulated uniform ranks

A table of K quantities gives each of them α/K (Bonferroni), so that a table in which nothing is
wrong has a flag anywhere with probability α, or less where quantities are correlated.

*Kind of failure.* With normal scores q = Φ⁻¹[(r + 1/2)/(L + 1)], a posterior that is displaced by
d of its own σ gives a mean of -d; one whose σ is s times too small gives a scatter of s. Mean and
second central moment of the scores over those of uniform ranks are therefore `shift` = -mean (of
the posterior from the truth, positive: too high) and `width` (scatter of the truth over the stated
one, above 1: intervals too narrow). Finite L cuts the scores off at Φ⁻¹[1/(2L + 2)], and both err
towards 0 and 1 where the truth often lies beyond all draws.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Final

import numpy as np
from astropy.table import Table
from numpy.typing import ArrayLike, NDArray
from scipy import stats
from scipy.special import ndtri

Array = NDArray[np.float64]
Ranks = NDArray[np.int64]

SEED: Final = 20220832
"""Of the simulated uniform ranks: the same table has the same bands."""

MOST_POINTS: Final = 100
"""Ranks at which the empirical distribution is looked at."""

TAIL: Final = 200
"""Simulated curves beyond the band, about: γ is good to 7%."""

MOST_SIMULATED: Final = 400_000
"""Simulated curves, at most."""

CHUNK: Final = 20_000
"""Curves that are simulated at once: bounds the memory."""

LEVELS: Final = (50, 68, 90, 95)
"""Central intervals whose coverage is counted [%]."""

INTERVAL: Final = 0.95
"""Confidence of the intervals of the coverage."""

MOST_BINS: Final = 20
LEAST_IN_BIN: Final = 10
"""Bins of the chi-square test, and the ranks that each holds on average, at least."""

SIGNIFICANT: Final = 3.0
"""Standard errors from which on a moment of the ranks gives a failure its name."""

MINOR: Final = 0.25
"""Share of the larger deviation below which the smaller one is not named."""

ALPHA: Final = 0.05
"""Chance of any flag in a table of calibrated posteriors."""

DEFINITION: Final = (
    "Ranks of the truth among {n_draws} posterior draws, {n} replicates. p_uniform: of the whole "
    "empirical distribution of ranks; flagged below alpha / number of quantities, alpha = {alpha:g}"
    " for the table. p_chi_square: of the ranks in {bins} bins. shift: posterior minus truth, in "
    "sigma of the posterior. width: scatter of the truth over the stated one, above 1 where "
    "intervals are too narrow. covered_c: share of truths in the central c% interval, with its "
    "exact binomial 95% interval (_lo, _hi); interval_share gives what calibrated posteriors cover."
)


@dataclass(frozen=True)
class UniformBand:
    """The band that holds the empirical distribution of uniform ranks as a whole.

    Parameters
    ----------
    at : ndarray, shape (n_points,)
        Share of all ranks up to each point, (r + 1)/(L + 1).
    lo, hi : ndarray, shape (n_points,)
        Ends of the band, as shares of the replicates.
    gamma : float
        Level of the pointwise intervals.
    """

    at: Array
    lo: Array
    hi: Array
    gamma: float


def rank_table(ranks: ArrayLike, n_draws: int, names: Sequence[str], alpha: float = ALPHA) -> Table:
    """Return one line a quantity: uniformity, coverage, and the kind of failure in words.

    Parameters
    ----------
    ranks : array_like of int, shape (n_replicates, n_quantities)
        Ranks of the truth, 0 ... `n_draws`; ties broken at random.
    n_draws : int
        L, the number of independent posterior draws of each replicate.
    names : sequence of str
        Names of the quantities.
    alpha : float
        Chance of any flag where all posteriors are calibrated.

    Returns
    -------
    astropy.table.Table
        ``quantity``, ``p_uniform``, ``p_chi_square``, ``shift``, ``width``, ``covered_50`` ... with
        ``_lo`` and ``_hi``, ``flag`` (empty, or words).

    Raises
    ------
    ValueError
        Where shapes, names or ranks do not fit together.
    """
    ranks = checked(ranks, n_draws, names)
    n, n_quantities = ranks.shape
    p_uniform, outside = uniformity(ranks, n_draws, alpha)
    shift, width, z_shift, z_width = moments(ranks, n_draws)
    table = Table()
    table["quantity"] = list(names)
    table["p_uniform"] = p_uniform
    table["p_chi_square"] = [chi_square(column, n_draws) for column in ranks.T]
    table["shift"] = shift
    table["width"] = width
    for name, values in coverage(ranks, n_draws).items():
        table[name] = values
    table["flag"] = [
        failure(*deviations) if bad else ""
        for bad, *deviations in zip(outside, z_shift, z_width, strict=True)
    ]
    table.meta["definition"] = DEFINITION.format(
        n=n, n_draws=n_draws, alpha=alpha, bins=len(_bins(n, n_draws))
    )
    table.meta.update(
        alpha=alpha,
        alpha_of_each=alpha / n_quantities,
        n_replicates=n,
        n_draws=n_draws,
        interval_share={str(level): _central(n_draws, level)[1] for level in LEVELS},
    )
    return table


def checked(ranks: ArrayLike, n_draws: int, names: Sequence[str]) -> Ranks:
    """Return ranks as an array, after checking that they are ranks of these quantities.

    Parameters
    ----------
    ranks : array_like of int, shape (n_replicates, n_quantities)
    n_draws : int
    names : sequence of str

    Raises
    ------
    ValueError
        Where shapes, names or ranks do not fit together.
    """
    array = np.asarray(ranks)
    if array.ndim != 2 or not array.size or array.shape[1] != len(names):
        raise ValueError(
            f"ranks have the shape {array.shape}, must be (n_replicates, {len(names)})"
        )
    if not np.issubdtype(array.dtype, np.integer):
        raise ValueError(f"ranks are of type {array.dtype}, must be whole numbers")
    if array.min() < 0 or array.max() > n_draws:
        what = f"ranks run from {array.min()} to {array.max()}, must lie in 0 to {n_draws}"
        raise ValueError(what)
    return array.astype(np.int64)


# Uniformity


def uniformity(ranks: Ranks, n_draws: int, alpha: float) -> tuple[Array, NDArray[np.bool_]]:
    """Return p-values of uniform ranks, and which quantities leave their band.

    Parameters
    ----------
    ranks : ndarray of int, shape (n_replicates, n_quantities)
    n_draws : int
    alpha : float
        Of all quantities together.

    Returns
    -------
    p_values : ndarray, shape (n_quantities,)
        Not corrected for the number of quantities.
    outside : ndarray of bool, shape (n_quantities,)
    """
    n, n_quantities = ranks.shape
    share = alpha / n_quantities
    null = _simulated(n, n_draws, _n_simulated(share))
    least = _least_tail(counts_below(ranks, n_draws), _tails(n, n_draws))
    p_values = (1.0 + np.searchsorted(null, least, side="right")) / (1.0 + len(null))
    return np.asarray(p_values), least < _gamma(null, share)


def uniform_band(
    n_replicates: int, n_draws: int, alpha: float = ALPHA, n_quantities: int = 1
) -> UniformBand:
    """Return the simultaneous band of the empirical distribution of uniform ranks.

    Parameters
    ----------
    n_replicates, n_draws : int
    alpha : float
        Chance that any of the curves leaves the band anywhere.
    n_quantities : int
        Number of curves.
    """
    share = alpha / n_quantities
    gamma = _gamma(_simulated(n_replicates, n_draws, _n_simulated(share)), share)
    inside = _tails(n_replicates, n_draws) >= gamma
    lo = inside.argmax(axis=1)
    hi = n_replicates - inside[:, ::-1].argmax(axis=1)
    return UniformBand(_shares(n_draws), lo / n_replicates, hi / n_replicates, gamma)


def counts_below(ranks: Ranks, n_draws: int) -> Ranks:
    """Return how many ranks are at or below each point, shape (n_quantities, n_points)."""
    ordered = np.sort(ranks, axis=0)
    points = _points(n_draws)
    return np.stack([np.searchsorted(column, points, side="right") for column in ordered.T])


def _points(n_draws: int) -> Ranks:
    """Return the ranks at which curves are looked at; at L itself they are all 1."""
    points = np.linspace(0, n_draws - 1, min(n_draws, MOST_POINTS))
    return np.unique(points.round().astype(np.int64))


def _shares(n_draws: int) -> Array:
    return np.asarray((_points(n_draws) + 1.0) / (n_draws + 1.0), dtype=float)


@lru_cache(maxsize=8)
def _tails(n_replicates: int, n_draws: int) -> Array:
    """Return twice the smaller tail of every count, shape (n_points, n_replicates + 1)."""
    count, share = np.arange(n_replicates + 1), _shares(n_draws)[:, None]
    below = stats.binom.cdf(count, n_replicates, share)
    above = stats.binom.sf(count - 1, n_replicates, share)
    return np.asarray(2.0 * np.minimum(below, above))


def _least_tail(counts: Ranks, tails: Array) -> Array:
    """Return the smallest tail along every curve, from counts of shape (n_curves, n_points)."""
    return np.asarray(tails[np.arange(len(tails)), counts].min(axis=1))


def _n_simulated(alpha: float) -> int:
    return int(min(MOST_SIMULATED, CHUNK * np.ceil(TAIL / alpha / CHUNK)))


@lru_cache(maxsize=8)
def _simulated(n_replicates: int, n_draws: int, n_simulated: int) -> Array:
    """Return the smallest tails of simulated uniform ranks, sorted, shape (n_simulated,)."""
    rng = np.random.default_rng(SEED)
    steps = np.diff(_shares(n_draws), prepend=0.0, append=1.0)
    tails = _tails(n_replicates, n_draws)
    parts = []
    for _ in range(n_simulated // CHUNK):
        counts = rng.multinomial(n_replicates, steps, CHUNK)[:, :-1].cumsum(axis=1)
        parts.append(_least_tail(counts, tails))
    return np.asarray(np.sort(np.concatenate(parts)))


def _gamma(null: Array, alpha: float) -> float:
    """Return the tail below which a share of at most α of the simulated curves falls."""
    return float(null[int(alpha * len(null))])


def chi_square(ranks: Ranks, n_draws: int) -> float:
    """Return the chi-square p-value of ranks of one quantity, shape (n_replicates,), in bins.

    Notes
    -----
    Bins hold as nearly the same number of possible ranks as whole numbers can. NaN where there are
    too few ranks for two bins.
    """
    sizes = _bins(len(ranks), n_draws)
    if len(sizes) < 2:
        return float("nan")
    edges = np.concatenate([[0], np.cumsum(sizes)])
    found = np.histogram(ranks, edges - 0.5)[0]
    expected = len(ranks) * sizes / (n_draws + 1.0)
    return float(stats.chi2.sf(((found - expected) ** 2 / expected).sum(), len(sizes) - 1))


def _bins(n_replicates: int, n_draws: int) -> Ranks:
    """Return how many possible ranks each bin holds."""
    n_bins = max(1, min(MOST_BINS, n_replicates // LEAST_IN_BIN, n_draws + 1))
    edges = np.linspace(0, n_draws + 1, n_bins + 1).round()
    return np.asarray(np.diff(edges), dtype=np.int64)


# Coverage


def coverage(ranks: Ranks, n_draws: int) -> dict[str, Array]:
    """Return the share of truths in central intervals, with Clopper-Pearson intervals.

    Parameters
    ----------
    ranks : ndarray of int, shape (n_replicates, n_quantities)
    n_draws : int

    Returns
    -------
    dict of str to ndarray, shape (n_quantities,)
        ``covered_50``, ``covered_50_lo``, ``covered_50_hi``, ...

    References
    ----------
    Clopper & Pearson 1934, Biometrika 26, 404.
    """
    n = len(ranks)
    columns: dict[str, Array] = {}
    for level in LEVELS:
        inside = _central(n_draws, level)[0][ranks].sum(axis=0)
        lo, hi = _clopper_pearson(inside, n)
        columns[f"covered_{level}"] = inside / n
        columns |= {f"covered_{level}_lo": lo, f"covered_{level}_hi": hi}
    return columns


def _central(n_draws: int, level: float) -> tuple[NDArray[np.bool_], float]:
    """Return which ranks lie in a central interval, shape (L + 1,), and their share of all.

    A number of ranks is whole; with the share beside it the coverage still has its right scale.
    """
    from_middle = np.abs(np.arange(n_draws + 1) - 0.5 * n_draws)
    inside = from_middle < 0.005 * level * (n_draws + 1) - 1e-9
    return inside, float(inside.mean())


def _clopper_pearson(inside: Any, n: int) -> tuple[Array, Array]:
    tail = 0.5 * (1.0 - INTERVAL)
    lo = np.where(inside > 0, stats.beta.ppf(tail, np.maximum(inside, 1), n - inside + 1), 0.0)
    hi = np.where(inside < n, stats.beta.isf(tail, inside + 1, np.maximum(n - inside, 1)), 1.0)
    return lo, hi


# Kind of failure


def moments(ranks: Ranks, n_draws: int) -> tuple[Array, Array, Array, Array]:
    """Return how far posteriors are displaced and how much too narrow they are.

    Parameters
    ----------
    ranks : ndarray of int, shape (n_replicates, n_quantities)
    n_draws : int

    Returns
    -------
    shift : ndarray, shape (n_quantities,)
        Posterior minus truth, in σ of the posterior.
    width : ndarray, shape (n_quantities,)
        Scatter of the truth over the stated σ.
    z_shift, z_width : ndarray, shape (n_quantities,)
        Both against their null, in standard errors; of the width's square.
    """
    scores = ndtri((np.arange(n_draws + 1) + 0.5) / (n_draws + 1.0))
    variance = float(np.mean(scores**2))
    spread = float(np.sqrt(np.mean(scores**4) - variance**2))
    found, n = scores[ranks], len(ranks)
    mean, second = found.mean(axis=0), found.var(axis=0)
    z_shift = -mean / np.sqrt(variance / n)
    z_width = (second - variance) / (spread / np.sqrt(n)) if spread > 0.0 else np.zeros_like(mean)
    return -mean, np.sqrt(second / variance), z_shift, z_width


def failure(z_shift: float, z_width: float) -> str:
    """Return what is wrong with posteriors whose ranks are not uniform, in words.

    Parameters
    ----------
    z_shift, z_width : float
        From `moments`.
    """
    least = max(SIGNIFICANT, MINOR * max(abs(z_shift), abs(z_width)))
    words = []
    if abs(z_width) >= least:
        words.append("intervals too narrow" if z_width > 0.0 else "intervals too wide")
    if abs(z_shift) >= least:
        words.append("biased high" if z_shift > 0.0 else "biased low")
    return ", ".join(words) or "ranks not uniform"
