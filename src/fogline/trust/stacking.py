"""Models side by side: how much weight each deserves, and what they say together.

*Stacking* (Yao, Vehtari, Simpson & Gelman 2018, Bayesian Analysis 13, 917): the weights w on the
simplex that maximise Σ_i ln Σ_k w_k p_k(y_i | y_-i), the predictive density of every row by the
others (`fogline.trust.leave_one_out`). The problem is concave; the fixed point of

    w_k ← w_k · mean_i [ p_ki / Σ_l w_l p_li ]

climbs to it. *Evidence*: w_k ∝ Z_k, with the errors of ln Z by Monte Carlo. Stacking asks which
mixture predicts best and is at ease with several wrong models; evidence asks which one is true if
one is, and leans on the width of the priors.

Together: draws of the models in proportion to their weights. Only derived quantities are combined;
parameters of different models mean different things. The variance of the mixture is that within
models plus that between them; the latter's share is how much of the error bar is choice.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp

Array = NDArray[np.float64]

MOST_ROUNDS: Final = 100_000
STILL: Final = 1e-10
"""Change of a weight at which the climb ends."""

EVIDENCE_DRAWS: Final = 4000


@dataclass(frozen=True)
class Combined:
    """One quantity of a family.

    Parameters
    ----------
    bands : ndarray, shape (5,)
        Quantiles 0.5, 0.16, 0.84, 0.025, 0.975 of the mixture.
    choice_share : float
        Variance between models over that of the mixture.
    """

    bands: Array
    choice_share: float


QUANTILES: Final = (0.5, 0.16, 0.84, 0.025, 0.975)


def stacking_weights(ln_p: Array) -> Array:
    """Return the weights whose mixture predicts best.

    Parameters
    ----------
    ln_p : ndarray, shape (n_rows, n_models)
        ln of leave-one-out predictive densities.

    Returns
    -------
    ndarray, shape (n_models,)
    """
    relative = np.exp(ln_p - ln_p.max(axis=1, keepdims=True))
    weight = np.full(ln_p.shape[1], 1.0 / ln_p.shape[1])
    for _ in range(MOST_ROUNDS):
        new = weight * (relative / (relative @ weight)[:, None]).mean(axis=0)
        if np.abs(new - weight).max() < STILL:
            break
        weight = new
    return np.asarray(new / new.sum())


def evidence_weights(
    ln_z: Array, error: Array, rng: np.random.Generator
) -> tuple[Array, Array, Array]:
    """Return posterior probabilities of models with equal prior ones, and their 68% range.

    Parameters
    ----------
    ln_z, error : ndarray, shape (n_models,)
    rng : numpy.random.Generator

    Returns
    -------
    weight, lo68, hi68 : ndarray, shape (n_models,)
    """
    drawn = ln_z + error * rng.standard_normal((EVIDENCE_DRAWS, len(ln_z)))
    shares = np.exp(drawn - logsumexp(drawn, axis=1, keepdims=True))
    lo, hi = np.quantile(shares, (0.16, 0.84), axis=0)
    return np.exp(ln_z - logsumexp(ln_z)), lo, hi


def combine(values: list[Array], weight: Array) -> Combined:
    """Return the mixture of one quantity's draws.

    Parameters
    ----------
    values : list of ndarray, each (n_draws,)
        Draws of every model; may hold infinities (paths beyond reach).
    weight : ndarray, shape (n_models,)
    """
    pooled = np.concatenate(values)
    share = np.concatenate(
        [np.full(len(v), w / len(v)) for v, w in zip(values, weight, strict=True)]
    )
    order = np.argsort(pooled)
    below = np.cumsum(share[order])
    at = np.minimum(np.searchsorted(below, np.array(QUANTILES) * below[-1]), len(pooled) - 1)
    bands = pooled[order][at]
    kept = weight > 0.0
    used = [v for v, keep in zip(values, kept, strict=True) if keep]
    w = weight[kept] / weight[kept].sum()
    with np.errstate(invalid="ignore"):
        mean = np.array([v.mean() for v in used])
        variance = np.array([v.var() for v in used])
        between = float(w @ (mean - w @ mean) ** 2)
        whole = float(w @ variance) + between
    usable = np.isfinite(whole) and whole > 0.0
    return Combined(bands, between / whole if usable else float("nan"))
