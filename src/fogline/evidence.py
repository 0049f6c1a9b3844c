"""Evidence by importance sampling with a frozen mixture.

With draws x_i of the mixture q, weights w_i = p(x_i) / q(x_i) of the unnormalised posterior p:
ln Z = ln mean(w), its error from the variance of the weights, the efficiency (sum w)^2 / (n sum
w^2), and the shape k-hat of a generalised Pareto tail fitted to the largest weights (Vehtari et
al. 2024, JMLR 25, 72): above 0.7 the error itself can't be trusted.

The same weights give posterior means and widths that owe nothing to the chain. A chain that
samples something else than p, be it in agreement with its fellows, disagrees with them.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp

from fogline.mixture import StudentMixture

Array = NDArray[np.float64]
LogProb = Callable[[Array], Array]

CHUNK: Final = 1024
"""Points evaluated at once: bounds the memory of the posterior."""

GOAL: Final = 0.01
"""Error of ln Z at which to stop drawing."""


@dataclass(frozen=True)
class Importance:
    """What importance sampling says of a posterior.

    Parameters
    ----------
    ln_z : float
        Logarithm of the evidence.
    error : float
        Its standard error.
    efficiency : float
        Effective over actual draws.
    pareto_k : float
        Shape of the tail of the weights.
    n : int
        Draws.
    mean, sd : ndarray, shape (n_dim,)
        Posterior means and standard deviations.
    mean_error : ndarray, shape (n_dim,)
        Standard errors of `mean`.
    sd_error : ndarray, shape (n_dim,)
        Relative standard errors of `sd`.
    """

    ln_z: float
    error: float
    efficiency: float
    pareto_k: float
    n: int
    mean: Array
    sd: Array
    mean_error: Array
    sd_error: Array


def importance_sample(
    log_prob: LogProb,
    mixture: StudentMixture,
    rng: np.random.Generator,
    *,
    n_min: int = 20_480,
    n_max: int = 61_440,
) -> Importance:
    """Draw from the mixture until ln Z is known to `GOAL`, or `n_max` draws are made.

    Parameters
    ----------
    log_prob : callable
        ``(n, n_dim) -> (n,)``; -inf allowed.
    mixture : StudentMixture
        Fitted to the posterior.
    rng : Generator
        The result is a function of its state.
    n_min, n_max : int, optional
        Least and largest number of draws.

    Returns
    -------
    Importance
    """
    points: list[Array] = []
    ln_weights: list[Array] = []
    while (n := CHUNK * len(points)) < n_max:
        if n >= n_min and _error(np.concatenate(ln_weights)) < GOAL:
            break
        x = mixture.draw(CHUNK, rng)
        points.append(x)
        ln_weights.append(log_prob(x) - mixture.ln_density(x))
    return summarise(np.concatenate(points), np.concatenate(ln_weights))


def summarise(x: Array, ln_weight: Array) -> Importance:
    """Return evidence and moments from weighted draws.

    Parameters
    ----------
    x : ndarray, shape (n, n_dim)
        Draws.
    ln_weight : ndarray, shape (n,)
        Their ln weights; -inf allowed.

    Returns
    -------
    Importance
        With ``ln_z`` -inf and nothing trusted where every weight vanishes.
    """
    n, d = x.shape
    if not (ln_weight > -np.inf).any():
        nothing = np.full(d, np.inf)
        return Importance(
            -np.inf, np.inf, 0.0, np.inf, n, np.zeros(d), np.ones(d), nothing, nothing
        )
    share = np.exp(ln_weight - logsumexp(ln_weight))
    mean = share @ x
    deviation = x - mean
    variance = share @ deviation**2
    return Importance(
        ln_z=float(logsumexp(ln_weight) - np.log(n)),
        error=_error(ln_weight),
        efficiency=float(1.0 / (n * (share**2).sum())),
        pareto_k=_pareto_k(ln_weight),
        n=n,
        mean=mean,
        sd=np.sqrt(variance),
        mean_error=np.sqrt(share**2 @ deviation**2),
        sd_error=0.5 * np.sqrt(share**2 @ (deviation**2 - variance) ** 2) / variance,
    )


def _error(ln_weight: Array) -> float:
    """Return the standard error of ln mean(w), by the delta method."""
    weight = np.exp(ln_weight - ln_weight.max()) if ln_weight.max() > -np.inf else None
    if weight is None:
        return float("inf")
    return float(np.std(weight, ddof=1) / weight.mean() / np.sqrt(len(weight)))


def _pareto_k(ln_weight: Array) -> float:
    from arviz_stats.base import array_stats

    if np.ptp(ln_weight[ln_weight > -np.inf]) < 1e-9:
        return float("-inf")  # all weights equal: no tail
    # psislw expects ln likelihoods left out, hence the reversed sign.
    _, k = array_stats.psislw(-ln_weight)
    return float(k)


@dataclass(frozen=True)
class Evidence:
    """Evidence from all ensembles together.

    Parameters
    ----------
    ln_z : float
        Mean with inverse-variance weights.
    error : float
        Its standard error.
    efficiency : float
        The least.
    pareto_k : float
        The largest.
    disagreement : float
        Largest difference between two ensembles in units of its error; 0 for one ensemble.
    difference : float
        The difference in ln Z that goes with it.
    """

    ln_z: float
    error: float
    efficiency: float
    pareto_k: float
    disagreement: float
    difference: float


def combine_evidence(results: Sequence[Importance]) -> Evidence:
    """Combine the ensembles' evidences and say how well they agree.

    Parameters
    ----------
    results : sequence of Importance
        At least one.

    Returns
    -------
    Evidence
    """
    ln_z = np.array([r.ln_z for r in results])
    error = np.maximum([r.error for r in results], 1e-12)
    usable = np.isfinite(ln_z) & np.isfinite(error)
    # numpy's extremes keep a NaN, Python's lose it.
    efficiency = float(np.min([r.efficiency for r in results]))
    k = float(np.max([r.pareto_k for r in results]))
    if not usable.all():
        return Evidence(-np.inf, np.inf, efficiency, k, np.inf, np.inf)
    weight = 1.0 / error**2
    i, j = np.triu_indices(len(ln_z), 1)
    difference = np.abs(ln_z[i] - ln_z[j])
    pulls = difference / np.hypot(error[i], error[j])
    worst = int(pulls.argmax()) if len(pulls) else None
    return Evidence(
        ln_z=float((weight @ ln_z) / weight.sum()),
        error=float(weight.sum() ** -0.5),
        efficiency=efficiency,
        pareto_k=k,
        disagreement=0.0 if worst is None else float(pulls[worst]),
        difference=0.0 if worst is None else float(difference[worst]),
    )
