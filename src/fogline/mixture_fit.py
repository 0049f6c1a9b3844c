"""Fit of a Student-t mixture to samples by expectation-maximisation on the t-mixture itself.

Every sample carries a latent scale weight u = (dof + d) / (dof + m), m its squared Mahalanobis
distance, which takes the pull out of outlying samples (Peel & McLachlan 2000, Statistics and
Computing 10, 339; from memory). Samples are first brought to a common frame by a robust centre and
covariance; centres start far apart from each other and are refined to nearest samples.
"""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_triangular

from fogline.mixture import StudentMixture, ln_sum

Array = NDArray[np.float64]

LLOYD_STEPS: Final = 4
"""Nearest-centre refinements of the start; EM does the rest."""

POOLED_WEIGHT: Final = 1.0
"""Samples' worth, for each number in a covariance, of the components' average covariance in each
one's own. Sixteen components of 13 dimensions have 1 700 numbers: without it they fit the noise of
the warm-up's samples, and one posterior sample in a thousand has p / q of e^9 instead of e^6."""

FLOOR_VARIANCE: Final = 1e-3
"""Variance, in units of the samples' own and one sample's worth, that keeps factors regular."""

SUBSET: Final = 4
"""The first iterations see every so-many-th sample; they cost that much less."""

FULL_ITERATIONS: Final = 10
"""Iterations on all samples."""


def fit_student_mixture(
    samples: Array,
    n_components: int,
    rng: np.random.Generator,
    *,
    dof: float = 8.0,
    pooled_weight: float = POOLED_WEIGHT,
    max_iterations: int = 60,
    tolerance: float = 2e-3,
) -> StudentMixture:
    """Fit a Student-t mixture by expectation-maximisation.

    Parameters
    ----------
    samples : ndarray, shape (n, n_dim)
        May hold repeats and outlying points, such as walkers that got stuck.
    n_components : int
        Components at the start; those that end with too few samples are dropped.
    rng : Generator
        Chooses the starting centres; the fit is a function of the samples and of its state.
    dof : float, optional
        Degrees of freedom.
    pooled_weight : float, optional
        Samples' worth, for each number in a covariance, of the average covariance in each
        component's own; 0 where walkers are still on their way, whose spread is no example.
    max_iterations : int, optional
        Iterations at most, on a subset; `FULL_ITERATIONS` on all samples follow.
    tolerance : float, optional
        Gain of the mean ln density at which to stop.

    Returns
    -------
    StudentMixture

    Raises
    ------
    ValueError
        With fewer than ``2 (n_dim + 1)`` samples, or samples that are not finite.
    """
    n, d = samples.shape
    if n < 2 * (d + 1) or not np.isfinite(samples).all():
        raise ValueError(f"a mixture needs {2 * (d + 1)} finite samples or more, got {n}")
    centre, scale = _robust_frame(samples)
    x = solve_triangular(scale, (samples - centre).T, lower=True).T
    # Shuffled: neighbours in a chain are alike, and a subset must not be one stretch of it.
    x = x[rng.permutation(n)]
    pooled_weight *= 0.5 * d * (d + 1)
    few = x[: max(n // SUBSET, 2 * (d + 1))]
    assignment = _starting_assignment(few, n_components, rng)
    mixture = _maximise(few, _products(few), assignment, assignment, dof, pooled_weight)
    mixture = _improve(mixture, few, max_iterations, tolerance, pooled_weight)
    mixture = _improve(mixture, x, FULL_ITERATIONS, tolerance, pooled_weight)
    return StudentMixture(
        mixture.weights, mixture.means @ scale.T + centre, scale @ mixture.factors, dof
    )


def _robust_frame(samples: Array) -> tuple[Array, Array]:
    """Return centre and lower factor of the samples' covariance, outliers held down."""
    centre = np.median(samples, axis=0)
    spread = np.quantile(np.abs(samples - centre), 0.68, axis=0)
    # A coordinate that never moved still needs a scale.
    spread = np.maximum(spread, 1e-9 * np.maximum(1.0, np.abs(centre)))
    held = np.clip((samples - centre) / spread, -4.0, 4.0)
    covariance = np.cov(held, rowvar=False).reshape(len(centre), -1)
    covariance += 1e-9 * np.eye(len(centre))
    return centre, spread[:, None] * np.linalg.cholesky(covariance)


def _improve(
    mixture: StudentMixture, x: Array, n: int, tolerance: float, pooled_weight: float
) -> StudentMixture:
    """Return the mixture after at most `n` iterations of expectation-maximisation."""
    products, dof = _products(x), mixture.dof
    previous = -np.inf
    for _ in range(n):
        ln_part, distance = mixture.ln_components(x)
        ln_density = ln_sum(ln_part)
        mean = float(ln_density.mean())
        if mean - previous < tolerance:
            break
        previous = mean
        responsibility = np.exp(ln_part - ln_density)
        pull = responsibility * ((dof + x.shape[1]) / (dof + distance))
        mixture = _maximise(x, products, responsibility, pull, dof, pooled_weight)
    return mixture


def _maximise(
    x: Array, products: Array, responsibility: Array, pull: Array, dof: float, pooled_weight: float
) -> StudentMixture:
    """Return the mixture that the assignment (C, n) and its latent scales ask for."""
    d = x.shape[1]
    kept = responsibility.sum(axis=1) > d + 1.0
    responsibility, pull = responsibility[kept], pull[kept]
    count, total = responsibility.sum(axis=1), pull.sum(axis=1)
    means = pull @ x / total[:, None]
    second = (pull @ products).reshape(-1, d, d)
    scatter = second - total[:, None, None] * means[:, :, None] * means[:, None, :]
    pooled = scatter.sum(axis=0) / count.sum()
    scatter += pooled_weight * pooled + FLOOR_VARIANCE * np.eye(d)
    scatter /= (count + pooled_weight + 1.0)[:, None, None]
    return StudentMixture(count / count.sum(), means, np.linalg.cholesky(scatter), dof)


def _products(x: Array) -> Array:
    """Return x_i x_j of every sample, shape (n, d*d): all second moments in one product."""
    return (x[:, :, None] * x[:, None, :]).reshape(len(x), -1)


def _starting_assignment(x: Array, n_components: int, rng: np.random.Generator) -> Array:
    """Return a 0/1 assignment (C, n) from spread-out centres, refined to nearest ones."""
    # Outlying samples would attract all the centres: distances are cut at the bulk's radius.
    radius = 4.0 * x.shape[1]
    centres = x[[rng.integers(len(x))]]
    nearest = np.minimum(_squared(x, centres)[0], radius)
    while len(centres) < n_components and nearest.sum() > 0.0:
        chosen = x[[rng.choice(len(x), p=nearest / nearest.sum())]]
        centres = np.concatenate([centres, chosen])
        nearest = np.minimum(nearest, _squared(x, chosen)[0])
    for _ in range(LLOYD_STEPS):
        member = _squared(x, centres).argmin(axis=0) == np.arange(len(centres))[:, None]
        member = member[member.any(axis=1)]
        centres = (member @ x) / member.sum(axis=1)[:, None]
    if not (member.sum(axis=1) > x.shape[1] + 1.0).any():
        return np.ones((1, len(x)))  # few samples, many components
    return member.astype(np.float64)


def _squared(x: Array, centres: Array) -> Array:
    """Return squared distances, shape (C, n)."""
    square = (centres**2).sum(axis=1)[:, None] - 2.0 * centres @ x.T + (x**2).sum(axis=1)
    return np.maximum(square, 0.0)
