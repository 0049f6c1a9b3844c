"""Student-t mixture fitted to samples: proposal of the independence move and of the evidence.

The density is a weighted sum of multivariate Student-t components with one number of degrees of
freedom; its tails fall as a power, so that no point of the posterior is out of reach of it
(normal components leave walkers stuck in their own tails). It is fitted by
expectation-maximisation on the t-mixture itself: every sample carries a latent scale weight
u = (dof + d) / (dof + m), m its squared Mahalanobis distance, which takes the pull out of
outlying samples (Peel & McLachlan 2000, Statistics and Computing 10, 339; from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_triangular
from scipy.special import gammaln

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


@dataclass(frozen=True)
class StudentMixture:
    """Mixture of multivariate Student-t densities.

    Parameters
    ----------
    weights : ndarray, shape (n_components,)
        Positive, summing to one.
    means : ndarray, shape (n_components, n_dim)
        Centres.
    factors : ndarray, shape (n_components, n_dim, n_dim)
        Lower Cholesky factors of the scale matrices.
    dof : float
        Degrees of freedom, the same for all components.
    """

    weights: Array
    means: Array
    factors: Array
    dof: float = 8.0

    @property
    def n_components(self) -> int:
        """Number of components."""
        return len(self.weights)

    @property
    def n_dim(self) -> int:
        """Number of dimensions."""
        return self.means.shape[1]

    @cached_property
    def _whitener(self) -> tuple[Array, Array]:
        """Stacked inverse factors (C*d, d) and whitened centres (C*d, 1)."""
        unit = np.eye(self.n_dim)
        inverse = [solve_triangular(factor, unit, lower=True) for factor in self.factors]
        centres = [w @ mean for w, mean in zip(inverse, self.means, strict=True)]
        return np.concatenate(inverse), np.concatenate(centres)[:, None]

    @cached_property
    def _ln_scale(self) -> Array:
        """Logarithm of each weighted component's density at its centre, shape (C, 1)."""
        half, d = 0.5 * self.dof, self.n_dim
        ln_det = np.log(np.diagonal(self.factors, axis1=1, axis2=2)).sum(axis=1)
        ln_t = gammaln(half + 0.5 * d) - gammaln(half) - 0.5 * d * np.log(self.dof * np.pi)
        return (np.log(self.weights) + ln_t - ln_det)[:, None]

    def distances(self, x: Array) -> Array:
        """Return squared Mahalanobis distances to every component.

        Parameters
        ----------
        x : ndarray, shape (n, n_dim)

        Returns
        -------
        ndarray, shape (n_components, n)
        """
        whitener, centres = self._whitener
        # One product for all components, points along the fast axis: this is the hot path.
        white = whitener @ x.T
        white -= centres
        white *= white
        return white.reshape(self.n_components, self.n_dim, -1).sum(axis=1)

    def ln_components(self, x: Array) -> tuple[Array, Array]:
        """Return weighted ln densities of the components and the distances, both (C, n)."""
        distance = self.distances(x)
        ln_part = np.log1p(distance / self.dof)
        ln_part *= -0.5 * (self.dof + self.n_dim)
        ln_part += self._ln_scale
        return ln_part, distance

    def ln_density(self, x: Array) -> Array:
        """Return the logarithm of the mixture's density.

        Parameters
        ----------
        x : ndarray, shape (n, n_dim)

        Returns
        -------
        ndarray, shape (n,)
        """
        return ln_sum(self.ln_components(x)[0])

    def draw(self, n: int, rng: np.random.Generator | np.random.RandomState) -> Array:
        """Draw points from the mixture.

        Parameters
        ----------
        n : int
            Number of points.
        rng : Generator or RandomState
            emcee still hands a RandomState to its moves.

        Returns
        -------
        ndarray, shape (n, n_dim)
        """
        edges = np.cumsum(self.weights)[:-1]
        component = np.searchsorted(edges, rng.uniform(size=n), side="right")
        normal = rng.standard_normal(size=(n, self.n_dim))
        normal /= np.sqrt(rng.chisquare(self.dof, size=n) / self.dof)[:, None]
        return self.means[component] + self.scaled(component, normal)

    def scaled(self, component: NDArray[np.intp], normal: Array) -> Array:
        """Return each row (n, n_dim) times the factor of its component (n,)."""
        out = np.empty_like(normal)
        for c in np.unique(component):
            mine = component == c
            out[mine] = normal[mine] @ self.factors[c].T
        return out


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


def ln_sum(ln_part: Array) -> Array:
    """Return ln of the sum over components (C, n); scipy's logsumexp is far slower here."""
    top = ln_part.max(axis=0)
    return np.asarray(top + np.log(np.exp(ln_part - top).sum(axis=0)))
