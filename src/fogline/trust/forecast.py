"""What a measurement that nobody made yet would bring: expected errors with it over those without.

A candidate is a set of rows that somebody might measure. Before it is measured its outcome y is
distributed as the posterior predicts, p(y) = ∫ p(y | θ) p(θ | D) dθ. Each of `n_outcomes` outcomes
is made by picking one posterior draw as the truth, and y from the candidate's own likelihood there.
The other draws θ_i, weighted by

    w_i ∝ p(y | θ_i),

are the posterior that would follow, no chain needed. The ratio of a derived quantity's weighted
standard deviation to the one without weights, averaged over outcomes, is its expected shrinkage::

    r = E_y[ sd(q | D, y) ] / sd(q | D)

The truth itself is left out of the weighted draws, and whatever is a copy of it: it would fit its
own outcome too well. Weights are Pareto-smoothed (Vehtari et al. 2024, JMLR 25, 72).

Errors and bias. A finite weighted sample has too small a variance, by about 1/n_eff, and its root
once more. A jackknife over `N_BLOCKS` contiguous blocks of draws, left out of weighted and
unweighted moments and of all outcomes alike, removes bias of that order; its variance is the error
from the finite number of draws, blocks being longer than any correlation along a chain. The spread
between outcomes over the root of their number is the other part; the two add in quadrature. Against
the closed form of a linear Gaussian problem r is right to 2% and within these errors
(`tests/unit/test_forecast.py`).

Where weights fail. A candidate that shrinks errors by much leaves few draws with any weight. Where
more than `MOST_FAILED` of the outcomes have a Pareto k of at least `WORST_K`, or as many have fewer
than `LEAST_EFFECTIVE` effective draws, the shrinkage is `unreliable`, and `linear` stands in its
place: the root of the residual variance of q after linear regression on y and ln y (y² where y may
be negative), over pairs (θ_i, y_i). It is exact for linear Gaussian problems, needs no weights, and
is an upper bound otherwise, since

    E_y[sd(q | y)] ≤ E_y[var(q | y)]^1/2 ≤ residual of any regression of q on y:

it promises no more than the candidate brings, and may promise much less.

Cautions. A forecast takes the fitted model as true and the stated errors as honest: it knows
neither of systematic errors that nobody stated, nor of surprises, nor of anything that the model
cannot represent. A shrinkage is about the width of the posterior; where prior and model make the
width, more data may well move and widen it. Standard deviations are ruled by tails: of a quantity
that spreads over a large factor, forecast the logarithm.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any, Final

import numpy as np
from astropy.table import Table
from numpy.typing import ArrayLike, NDArray

from fogline.datasets import MEASURED
from fogline.likelihood import Likelihood

Array = NDArray[np.float64]

WORST_K: Final = 0.7
"""Shape of the weights' tail from which on they cannot be trusted (Vehtari et al. 2024)."""

MOST_FAILED: Final = 0.1
"""Share of outcomes that may fail."""

LEAST_EFFECTIVE: Final = 25.0
"""Effective draws below which a standard deviation says little, whatever k."""

N_BLOCKS: Final = 20
"""Blocks of the jackknife."""

DEFINITION: Final = (
    "ratio: expected standard deviation of the quantity with the candidate over that without it, "
    "averaged over outcomes that the posterior predicts; ratio_error: its Monte Carlo error. "
    "sigma_now: standard deviation of the posterior draws. pareto_k: shape of the importance "
    "weights' tail that a tenth of the outcomes exceed. unreliable: weights fail, and ratio is an "
    "upper bound from linear regression. Candidates are in the order of their mean ratio. All "
    "assumes the fitted model and the stated errors."
)


@dataclass(frozen=True)
class Shrinkage:
    """What one candidate would bring.

    Parameters
    ----------
    sigma : mapping of str to float
        Standard deviation of every quantity now, in its unit.
    ratio, ratio_error : mapping of str to float
        Expected standard deviation with the candidate over that without, and its Monte Carlo
        error, from importance weights. NaN where quantity or prediction are not finite.
    linear, linear_error : mapping of str to float
        Upper bound on the ratio from linear regression, and its Monte Carlo error. NaN also where
        there are fewer than eight draws a row.
    pareto_k : ndarray, shape (n_outcomes,)
        Shape of the weights' tail of every outcome; -inf where all weights are equal.
    n_effective : ndarray, shape (n_outcomes,)
        Effective number of draws behind the weighted moments.
    """

    sigma: Mapping[str, float]
    ratio: Mapping[str, float]
    ratio_error: Mapping[str, float]
    linear: Mapping[str, float]
    linear_error: Mapping[str, float]
    pareto_k: Array
    n_effective: Array

    @property
    def share_failed(self) -> float:
        """Share of outcomes whose Pareto k is at least `WORST_K`."""
        return float(np.mean(~(self.pareto_k < WORST_K)))

    @property
    def upper_k(self) -> float:
        """Pareto k that a share `MOST_FAILED` of the outcomes exceed."""
        return float(np.quantile(self.pareto_k, 1.0 - MOST_FAILED, method="inverted_cdf"))

    @property
    def unreliable(self) -> bool:
        """Whether weights fail in more than `MOST_FAILED` of the outcomes."""
        few = float(np.mean(~(self.n_effective >= LEAST_EFFECTIVE)))
        return self.share_failed > MOST_FAILED or few > MOST_FAILED

    def best(self, quantity: str) -> tuple[float, float]:
        """Return ratio and error of a quantity: those of regression where weights fail."""
        if self.unreliable:
            return self.linear[quantity], self.linear_error[quantity]
        return self.ratio[quantity], self.ratio_error[quantity]


def expected_shrinkage(
    predicted_rows: ArrayLike,
    likelihood_of_candidate: Likelihood,
    quantities: Mapping[str, ArrayLike],
    rng: np.random.Generator,
    n_outcomes: int = 64,
    nuisances: Array | None = None,
) -> Shrinkage:
    """Return by how much a candidate is expected to shrink the errors of derived quantities.

    Parameters
    ----------
    predicted_rows : array_like, shape (n_draws, n_rows)
        Predictions of the candidate's rows for every posterior draw, in its own convention.
    likelihood_of_candidate : Likelihood
        Of these rows; its data are replaced by outcomes. Measurements and counts only.
    quantities : mapping of str to array_like, shape (n_draws,)
        Derived quantities of the same draws.
    rng : numpy.random.Generator
        Picks the truths and draws their outcomes.
    n_outcomes : int
        At least 2.
    nuisances : ndarray, shape (n_draws, n_nuisances), optional
        Draws from the priors of the candidate's own nuisance parameters (a scale, a scatter).

    Returns
    -------
    Shrinkage

    Raises
    ------
    ValueError
        Where shapes do not agree, draws are too few, or a row is a limit or part of a list.
    """
    predicted = np.asarray(predicted_rows, dtype=float)
    q = np.stack([np.asarray(values, dtype=float) for values in quantities.values()], axis=-1)
    _check(predicted, likelihood_of_candidate, q, n_outcomes)
    names = list(quantities)
    if not np.isfinite(predicted).all():
        return _nothing(names, q, n_outcomes)
    with np.errstate(invalid="ignore"):  # infinite quantities end as NaN, which says so
        mean, sigma = q.mean(axis=0), q.std(axis=0, ddof=1)
        scaled = (q - mean) / np.where(sigma > 0.0, sigma, np.nan)
    replicates = likelihood_of_candidate.replicate(predicted, rng, nuisances)
    n_draws = len(predicted)
    truths = rng.choice(n_draws, n_outcomes, replace=n_outcomes > n_draws)
    whole = np.empty((n_outcomes, q.shape[1]))
    left_out = np.empty((n_outcomes, N_BLOCKS, q.shape[1]))
    pareto_k, n_effective = np.empty(n_outcomes), np.empty(n_outcomes)
    # One outcome a truth: drawn anew, since a truth may be picked more than once.
    outcomes = likelihood_of_candidate.replicate(
        predicted[truths], rng, None if nuisances is None else nuisances[truths]
    )
    for j, (truth, outcome) in enumerate(zip(truths, outcomes, strict=True)):
        copies = (predicted == predicted[truth]).all(axis=1) & (q == q[truth]).all(axis=1)
        copies[truth] = True
        ln_weight = given(likelihood_of_candidate, outcome).ln_total(predicted, nuisances)
        weight = np.zeros(n_draws)
        weight[~copies], pareto_k[j] = smoothed(ln_weight[~copies])
        n_effective[j] = 1.0 / np.sum(weight**2)
        after, before = _block_sums(weight, scaled), _block_sums(1.0 * ~copies, scaled)
        whole[j] = _deviation(after.sum(axis=0)) / _deviation(before.sum(axis=0))
        left_out[j] = _deviation(after.sum(axis=0) - after) / _deviation(
            before.sum(axis=0) - before
        )
    # Where one block holds all the weight, nothing is left without it.
    left_out = np.where(np.isfinite(left_out), left_out, whole[:, None])
    ratio, error = _jackknifed(whole.mean(axis=0), left_out.mean(axis=0))
    error = np.hypot(error, whole.std(axis=0, ddof=1) / np.sqrt(n_outcomes))
    linear, linear_error = _regression(replicates, scaled)
    columns = (sigma, ratio, error, linear, linear_error)
    now, *found = (dict(zip(names, map(float, column), strict=True)) for column in columns)
    return Shrinkage(now, found[0], found[1], found[2], found[3], pareto_k, n_effective)


def given(likelihood: Likelihood, data: Array) -> Likelihood:
    """Return a likelihood with other data of the same kind and the same errors.

    Parameters
    ----------
    likelihood : Likelihood
    data : ndarray, shape (n_rows,)
        As `Likelihood.replicate` draws them.
    """
    rows = replace(likelihood.rows, observed=data)
    parts: Any = likelihood.parts
    return replace(likelihood, rows=rows, parts=tuple(replace(part, data=rows) for part in parts))


def smoothed(ln_weight: Array) -> tuple[Array, float]:
    """Return Pareto-smoothed weights and the shape of their tail.

    Parameters
    ----------
    ln_weight : ndarray, shape (n,)
        -inf allowed, not everywhere.

    Returns
    -------
    weight : ndarray, shape (n,)
        They sum to one.
    pareto_k : float
        -inf where all are equal and there is no tail; inf where one draw has all the weight.
    """
    from arviz_stats.base import array_stats

    top = ln_weight.max()
    if not top > -np.inf:
        return np.full(len(ln_weight), 1.0 / len(ln_weight)), float("inf")
    # A floor that no sum notices, for the fit of the tail knows no infinities.
    ln_weight = np.maximum(ln_weight - top, -600.0)
    if np.ptp(ln_weight) < 1e-9:
        return np.full(len(ln_weight), 1.0 / len(ln_weight)), float("-inf")
    # psislw expects ln likelihoods left out, hence the reversed sign. Its fit overflows where
    # hardly a draw has any weight; the weights then stay as they are.
    with np.errstate(all="ignore"):
        smooth, k = array_stats.psislw(-ln_weight)
    if not (np.isfinite(smooth).all() and np.isfinite(k)):
        smooth, k = ln_weight, np.inf
    weight = np.exp(smooth - smooth.max())
    return weight / weight.sum(), float(k)


def forecast_key(quantity: str, z: float) -> str:
    """Return the name under which a quantity at a redshift is forecast, e.g. ``rho_hi@2.5``."""
    return f"{quantity}@{z:g}"


def forecast_table(results: Mapping[str, Shrinkage]) -> Table:
    """Return what candidates would bring as a table, the most useful candidate first.

    Parameters
    ----------
    results : mapping of str to Shrinkage
        By candidate. Names of quantities are those of `forecast_key`, or without a redshift.

    Returns
    -------
    astropy.table.Table
        ``candidate, quantity, z, sigma_now, ratio, ratio_error, pareto_k, unreliable``; candidates
        by their mean ratio, those of which nothing can be said last; quantities of a candidate by
        their ratio.
    """
    rows: list[tuple[Any, ...]] = []
    for candidate in sorted(results, key=lambda name: _rank(results[name])):
        found = results[candidate]
        ranked = sorted(found.ratio, key=lambda name: _last_nan(found.best(name)[0]))
        for name in ranked:
            quantity, _, z = name.partition("@")
            numbers = (float(z) if z else np.nan, found.sigma[name], *found.best(name))
            bad = found.unreliable or not np.isfinite(found.best(name)[0])
            rows.append((candidate, quantity, *numbers, found.upper_k, bad))
    names = ["candidate", "quantity", "z", "sigma_now", "ratio", "ratio_error", "pareto_k"]
    table = Table(
        rows=rows or None,
        names=[*names, "unreliable"],
        dtype=["U64", "U64", *["f8"] * 5, "?"],
    )
    table.meta["definition"] = DEFINITION
    return table


def _last_nan(number: float) -> float:
    return number if np.isfinite(number) else float("inf")


def _rank(found: Shrinkage) -> float:
    ratios = [found.best(name)[0] for name in found.ratio]
    ratios = [ratio for ratio in ratios if np.isfinite(ratio)]
    return float(np.mean(ratios)) if ratios else float("inf")


def _check(predicted: Array, likelihood: Likelihood, q: Array, n_outcomes: int) -> None:
    n_rows = len(likelihood.observed)
    if predicted.ndim != 2 or predicted.shape[1] != n_rows:
        raise ValueError(
            f"predicted_rows has shape {predicted.shape}, must be (n_draws, {n_rows}) as the "
            "likelihood has rows"
        )
    if q.shape[0] != len(predicted) or q.ndim != 2:
        raise ValueError(f"quantities must have one value for each of {len(predicted)} draws")
    least = 5 * N_BLOCKS
    if len(predicted) < least or n_outcomes < 2:
        raise ValueError(
            f"needs at least {least} draws and 2 outcomes, got {len(predicted)} and {n_outcomes}"
        )
    if (likelihood.limit != 0).any() or (likelihood.rows.role != MEASURED).any():
        raise ValueError("a candidate holds measurements and counts, no limits and no lists")


def _nothing(names: list[str], q: Array, n_outcomes: int) -> Shrinkage:
    """Return what is said of a candidate that some draws cannot predict."""
    nan = dict.fromkeys(names, float("nan"))
    with np.errstate(invalid="ignore"):
        sigma = dict(zip(names, map(float, q.std(axis=0, ddof=1)), strict=True))
    return Shrinkage(sigma, nan, nan, nan, nan, np.full(n_outcomes, np.inf), np.zeros(n_outcomes))


def _block_sums(weight: Array, x: Array) -> Array:
    """Return sums of weight, of weighted x and x² in contiguous blocks.

    Parameters
    ----------
    weight : ndarray, shape (n,)
    x : ndarray, shape (n, n_q)

    Returns
    -------
    ndarray, shape (N_BLOCKS, 3, n_q)
    """
    starts = np.linspace(0, len(x), N_BLOCKS, endpoint=False).astype(int)
    powers = np.stack([np.ones_like(x), x, x * x], axis=1) * weight[:, None, None]
    return np.asarray(np.add.reduceat(powers, starts, axis=0))


def _deviation(sums: Array) -> Array:
    """Return the standard deviation from sums as of `_block_sums`, shape (..., n_q)."""
    with np.errstate(invalid="ignore", divide="ignore"):
        mean, square = sums[..., 1, :] / sums[..., 0, :], sums[..., 2, :] / sums[..., 0, :]
        return np.asarray(np.sqrt(np.maximum(square - mean**2, 0.0)))


def _jackknifed(whole: Array, left_out: Array) -> tuple[Array, Array]:
    """Return an estimate without its bias of first order, and its error.

    Parameters
    ----------
    whole : ndarray, shape (n_q,)
        From all draws.
    left_out : ndarray, shape (N_BLOCKS, n_q)
        With each block left out.
    """
    n = len(left_out)
    mean = left_out.mean(axis=0)
    error = np.sqrt((n - 1) / n * np.sum((left_out - mean) ** 2, axis=0))
    return np.maximum(n * whole - (n - 1) * mean, 0.0), error


def _regression(y: Array, scaled: Array) -> tuple[Array, Array]:
    """Return the root of the share of variance that regression on y leaves, and its error.

    Parameters
    ----------
    y : ndarray, shape (n, n_rows)
        One outcome a draw.
    scaled : ndarray, shape (n, n_q)
        Quantities in units of their standard deviations, about their means.
    """
    n, n_rows = y.shape
    nan = np.full(scaled.shape[1], np.nan)
    if n < 8 * (n_rows + 1):
        return nan, nan
    x = np.concatenate([np.ones((n, 1)), _standard(y), _standard(_curved(y))], axis=1)
    finite = np.isfinite(scaled).all(axis=0)
    q = np.where(finite, scaled, 0.0)
    starts = np.linspace(0, n, N_BLOCKS, endpoint=False).astype(int)
    blocks = [slice(a, b) for a, b in zip(starts, [*starts[1:], n], strict=True)]
    products = [(x[b].T @ x[b], x[b].T @ q[b], (q[b] ** 2).sum(axis=0)) for b in blocks]
    total = [np.sum([p[i] for p in products], axis=0) for i in range(3)]
    whole = _residual(total[0], total[1], total[2])
    left_out = np.stack(
        [_residual(*(t - p for t, p in zip(total, product, strict=True))) for product in products]
    )
    ratio, error = _jackknifed(whole, left_out)
    return np.where(finite, ratio, np.nan), np.where(finite, error, np.nan)


def _standard(x: Array) -> Array:
    spread = x.std(axis=0)
    return np.asarray((x - x.mean(axis=0)) / np.where(spread > 0.0, spread, 1.0))


def _curved(y: Array) -> Array:
    """Return ln y of rows, of y + 1/2 where some are zero, and y² about the mean of the others."""
    shift = np.where((y > 0.0).all(axis=0), 0.0, 0.5)  # zeros are counts
    positive = (y >= 0.0).all(axis=0)
    return np.where(positive, np.log(np.where(positive, y + shift, 1.0)), _standard(y) ** 2)


def _residual(xx: Array, xq: Array, qq: Array) -> Array:
    """Return the residual over the whole standard deviation, degrees of freedom counted."""
    n, k = xx[0, 0], len(xx)
    residual = qq - np.sum(xq * (np.linalg.pinv(xx, hermitian=True) @ xq), axis=0)
    whole = qq - xq[0] ** 2 / n
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.sqrt(np.maximum(residual, 0.0) / (n - k) * (n - 1) / whole))
