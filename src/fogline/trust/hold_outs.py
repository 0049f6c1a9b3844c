"""Hold-outs: what all other data say of a data set, and what changes without it.

Where smoothed weights 1 / p(data set | θ) are good (k-hat < 0.7, `fogline.trust.weights`) the joint
posterior stands for the fit without the data set; elsewhere that fit is made
(`fogline.trust.refit`). The table says which was done.

Shifts of derived quantities compare two fits of which one has seen all data of the other. Their
difference has, to first order, the variance var(without) - var(joint), the noise they share having
dropped out; in quadrature the shift would look far too small. Where the data set hardly changes the
error there is no such scale, and the shift has no σ.

Pairwise: the data sets of one kind fitted alone, and the other kinds held against them. A kind that
constrains little predicts little, and can't disagree with anybody.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import asdict
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from fogline.deriving import make_draws
from fogline.headlines import HeadlineDraws, headline_draws
from fogline.response_file import Fit
from fogline.trust.held_out import HeldOut, held_out
from fogline.trust.refit import (
    nuisances_within,
    refit,
    subset,
    with_nuisances_from_prior,
)
from fogline.trust.weights import GOOD_K, resampled, smoothed_weights

Array = NDArray[np.float64]

DRAWS: Final = 4000
"""Draws of a fit that predict what was left out."""

LEAST_CHANGE: Final = 0.1
"""Relative change of the variance below which a shift has no σ: widths of draws are good to 4%."""

STREAM: Final = 1_000_081
"""Spawn key of the random streams of hold-outs."""


def hold_out(fit: Fit, theta: Array, group: str, members: Sequence[str]) -> dict[str, Any]:
    """Leave some data sets out, predict them, and see what moves.

    Parameters
    ----------
    fit : Fit
    theta : ndarray, shape (n_draws, n_parameters)
        Draws of the joint posterior.
    group : str
        Name of what is left out.
    members : sequence of str
        Its data sets.

    Returns
    -------
    dict
        Plain values: ``group, datasets, how, pareto_k, converged, reasons``, those of `HeldOut`,
        ``sigma``, and ``shifts`` (a list of mappings, one a headline quantity).
    """
    rng = _rng(fit, group)
    rest = subset(fit, [d.name for d in fit.response.datasets if d.name not in members])
    left_out = subset(fit, members)
    own = nuisances_within(fit, left_out.response)
    ln_p = left_out.posterior.ln_likelihood(theta[:, own])
    ln_weight, k = smoothed_weights(-ln_p)
    reasons: tuple[str, ...] = ()
    if k < GOOD_K:
        kept = resampled(ln_weight, DRAWS, rng)
        predicting = theta[kept][:, own]
        without, how, converged = theta[kept], "reweighted", True
    else:
        made = refit(rest)
        drawn = _spread(made.theta, DRAWS)
        predicting = with_nuisances_from_prior(drawn, left_out, rng)
        without, how = drawn, "refitted"
        converged, reasons = made.converged, made.reasons
    found = held_out(left_out.response, predicting, rng)
    n_model = fit.response.n_parameters
    joint = _headlines(fit, _spread(theta, DRAWS)[:, :n_model])
    other = _headlines(fit, without[:, :n_model])
    return {
        "group": group,
        "datasets": list(members),
        "how": how,
        "pareto_k": max(float(k), -1.0),
        "converged": converged,
        "reasons": list(reasons),
        **_plain(found),
        "shifts": shifts(joint, other),
    }


def fit_alone(fit: Fit, kinds: Mapping[str, Sequence[str]], kind: str) -> dict[str, Any]:
    """Fit the data sets of one kind alone, and hold the other kinds against it.

    Parameters
    ----------
    fit : Fit
    kinds : mapping of str to sequence of str
        Data sets of every kind.
    kind : str
        The one to fit.

    Returns
    -------
    dict
        Plain values: ``fitted, converged, reasons``, and ``against`` (a list of mappings).
    """
    rng = _rng(fit, kind)
    made = refit(subset(fit, kinds[kind]))
    drawn = _spread(made.theta, DRAWS)
    against = []
    for other, members in kinds.items():
        if other == kind:
            continue
        left_out = subset(fit, members)
        predicting = with_nuisances_from_prior(drawn, left_out, rng)
        found = held_out(left_out.response, predicting, rng)
        against.append({"predicted": other, **_plain(found)})
    return {
        "fitted": kind,
        "converged": made.converged,
        "reasons": list(made.reasons),
        "against": against,
    }


def shifts(joint: HeadlineDraws, without: HeadlineDraws) -> list[dict[str, Any]]:
    """Return how headline quantities move, in units of the error of the difference.

    Parameters
    ----------
    joint, without : HeadlineDraws
        With all data, and with some left out.
    """
    rows = []
    for i, (quantity, z) in enumerate(zip(joint.quantities, joint.z, strict=True)):
        now, then = (_median_and_sigma(h.values[:, i]) for h in (joint, without))
        variance = then[1] ** 2 - now[1] ** 2
        comparable = np.isfinite(variance) and variance > LEAST_CHANGE * now[1] ** 2
        shift = (now[0] - then[0]) / np.sqrt(variance) if comparable else float("nan")
        rows.append(
            {
                "quantity": quantity,
                "z": float(z),
                "median": now[0],
                "sigma": now[1],
                "median_without": then[0],
                "sigma_without": then[1],
                "shift_sigma": float(shift),
            }
        )
    return rows


def _median_and_sigma(values: Array) -> tuple[float, float]:
    lo, middle, hi = np.quantile(values, (0.16, 0.5, 0.84), method="inverted_cdf")
    sigma = 0.5 * (hi - lo) if np.isfinite(hi) else float("inf")
    return float(middle), float(sigma)


def _headlines(fit: Fit, theta: Array) -> HeadlineDraws:
    return headline_draws(make_draws(theta, fit.setting, fit.analysis))


def _plain(found: HeldOut) -> dict[str, Any]:
    return asdict(found) | {"sigma": found.sigma}


def _spread(theta: Array, n: int) -> Array:
    return theta[np.linspace(0, len(theta) - 1, min(n, len(theta))).astype(int)]


def _rng(fit: Fit, name: str) -> np.random.Generator:
    """Return a generator that depends on the analysis and on what is left out alone."""
    key = (STREAM, *name.encode())
    return np.random.default_rng(np.random.SeedSequence(fit.analysis.sampler.seed, spawn_key=key))


def level_of(false_alarm: float, n: int) -> float:
    """Return the p-value below which one of n hold-outs is in tension."""
    return float(-np.expm1(np.log1p(-false_alarm) / max(n, 1)))


def sigma_level(false_alarm: float, n: int) -> float:
    """Return the same in σ."""
    return float(-ndtri(0.5 * level_of(false_alarm, n)))
