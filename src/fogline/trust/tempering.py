"""The posterior by another road: populations that are led from the prior to it.

N particles are drawn from the prior. The likelihood's power β rises from 0 to 1 in steps after
which the weights L^Δβ leave half of N effective particles; particles are drawn again by weight, and
moved by Metropolis steps that leave prior × L^β as it is: independence proposals from a Student-t
mixture fitted to the population (as in `fogline.warmup`), and random walks with the population's
covariance, whose length is tuned to `GOAL` acceptance. Each β has as many sweeps as it takes
until positions have forgotten where they started (correlation below `FORGOTTEN` in every
coordinate). The product of the mean weights is the evidence (Del Moral, Doucet & Jasra 2006, J. R.
Statist. Soc. B 68, 411).

Several independent populations give the errors: particles of one share ancestors, populations share
nothing. No chain, no burn-in, no convergence criterion is in common with `fogline.ensemble` beyond
the posterior itself and the mixture's fit. Evidence and moments of known posteriors:
``tests/statistical/test_tempering.py``.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp

from fogline.mixture_fit import fit_student_mixture
from fogline.trust.weights import resampled

Array = NDArray[np.float64]
LnLikelihood = Callable[[Array], Array]

PARTICLES: Final = 1024
POPULATIONS: Final = 8
EFFECTIVE: Final = 0.5
"""Share of particles that a step of β leaves effective."""

GOAL: Final = 0.3
"""Acceptance of random walks."""

FORGOTTEN: Final = 0.1
"""Correlation of positions with those at the start of a temperature at which its sweeps end."""

LEAST_SWEEPS: Final = 3
MOST_SWEEPS: Final = 60
COMPONENTS: Final = 6
"""Of the mixture that independence proposals come from."""

MOST_STEPS: Final = 500
"""Temperatures, at most."""


@dataclass(frozen=True)
class Population:
    """Particles of one population at the posterior.

    Parameters
    ----------
    x : ndarray, shape (n_particles, n_dim)
    ln_z : float
    temperatures : ndarray, shape (n_steps,)
        β after every step; the last is 1.
    sweeps : int
        In all.
    forgotten : bool
        Whether positions were forgotten at the last temperature.
    """

    x: Array
    ln_z: float
    temperatures: Array
    sweeps: int
    forgotten: bool


def temper(
    ln_likelihood: LnLikelihood,
    n_dim: int,
    rng: np.random.Generator,
    *,
    n_particles: int = PARTICLES,
) -> Population:
    """Lead one population from the prior to the posterior.

    Parameters
    ----------
    ln_likelihood : callable
        ``(n, n_dim) -> (n,)`` in coordinates whose prior is a unit normal; -inf allowed.
    n_dim : int
    rng : numpy.random.Generator
    n_particles : int

    Returns
    -------
    Population

    Raises
    ------
    ValueError
        If no draw of the prior has a likelihood, or β does not reach one.
    """
    x = rng.standard_normal((n_particles, n_dim))
    ln_l = ln_likelihood(x)
    if not (ln_l > -np.inf).any():
        raise ValueError("no draw from the prior has a finite likelihood")
    temperatures: list[float] = []
    beta, ln_z, sweeps, scale = 0.0, 0.0, 0, 1.0
    forgotten = False
    while beta < 1.0:
        if len(temperatures) == MOST_STEPS:
            raise ValueError(f"{MOST_STEPS} temperatures have led to a power of {beta:.3g} only")
        step = _next_step(ln_l, 1.0 - beta)
        ln_weight = step * ln_l
        ln_z += float(logsumexp(ln_weight) - np.log(n_particles))
        kept = resampled(ln_weight - logsumexp(ln_weight), n_particles, rng)
        x, ln_l = x[kept], ln_l[kept]
        beta = 1.0 if step >= 1.0 - beta else beta + step
        moved = _Sweeps(ln_likelihood, beta, x, ln_l, scale, rng)
        forgotten = moved.run()
        x, ln_l, scale = moved.x, moved.ln_l, moved.scale
        sweeps += moved.n
        temperatures.append(beta)
    return Population(x, ln_z, np.array(temperatures), sweeps, forgotten)


def _next_step(ln_l: Array, most: float) -> float:
    """Return the step of β after which `EFFECTIVE` of the particles are left, at most `most`."""

    def effective(step: float) -> float:
        ln_weight = step * ln_l
        twice = logsumexp(2.0 * ln_weight)
        return float(np.exp(2.0 * logsumexp(ln_weight) - twice) / len(ln_l))

    # Particles without likelihood are lost at any step: what is left of the others counts.
    alive = float(np.mean(ln_l > -np.inf))
    if effective(most) >= EFFECTIVE * alive:
        return most
    lo, hi = 0.0, most
    for _ in range(60):
        middle = 0.5 * (lo + hi)
        lo, hi = (middle, hi) if effective(middle) >= EFFECTIVE * alive else (lo, middle)
    return max(lo, 1e-300)


class _Sweeps:
    """Metropolis moves of a population at one temperature."""

    def __init__(
        self,
        ln_likelihood: LnLikelihood,
        beta: float,
        x: Array,
        ln_l: Array,
        scale: float,
        rng: np.random.Generator,
    ) -> None:
        self.ln_likelihood = ln_likelihood
        self.beta = beta
        self.x, self.ln_l = x.copy(), ln_l.copy()
        self.scale = scale
        self.rng = rng
        self.n = 0

    def run(self) -> bool:
        """Move until positions are forgotten; return whether they are."""
        start = self.x.copy()
        distinct = np.unique(self.x, axis=0)
        n_components = min(COMPONENTS, max(1, len(distinct) // (10 * self.x.shape[1])))
        mixture = fit_student_mixture(self.x, n_components, self.rng)
        factor = np.linalg.cholesky(np.cov(self.x, rowvar=False) + 1e-12 * np.eye(self.x.shape[1]))
        ln_q = mixture.ln_density(self.x)
        while self.n < MOST_SWEEPS:
            proposal = mixture.draw(len(self.x), self.rng)
            ln_q_new = mixture.ln_density(proposal)
            taken = self._metropolis(proposal, ln_q - ln_q_new)
            ln_q = np.where(taken, ln_q_new, ln_q)
            for _ in range(2):
                noise = self.rng.standard_normal(self.x.shape) @ factor.T
                length = 2.38 / np.sqrt(self.x.shape[1]) * self.scale
                taken = self._metropolis(self.x + length * noise, np.zeros(len(self.x)))
                self.scale *= float(np.exp(taken.mean() - GOAL))
            ln_q = mixture.ln_density(self.x)
            self.n += 1
            if self.n >= LEAST_SWEEPS and self._correlation(start) < FORGOTTEN:
                return True
        return False

    def _metropolis(self, proposal: Array, ln_ratio: Array) -> NDArray[np.bool_]:
        """Accept or refuse proposals; `ln_ratio` is ln of backward over forward density."""
        ln_l = self.ln_likelihood(proposal)
        with np.errstate(invalid="ignore"):
            gain = self.beta * (ln_l - self.ln_l)
        gain += 0.5 * ((self.x**2).sum(axis=1) - (proposal**2).sum(axis=1)) + ln_ratio
        taken = np.log(self.rng.random(len(gain))) < gain
        self.x[taken], self.ln_l[taken] = proposal[taken], ln_l[taken]
        return taken

    def _correlation(self, start: Array) -> float:
        """Return the largest correlation of a coordinate with where it started."""
        now, then = self.x - self.x.mean(axis=0), start - start.mean(axis=0)
        norm = np.sqrt((now**2).sum(axis=0) * (then**2).sum(axis=0))
        return float(((now * then).sum(axis=0) / np.where(norm > 0.0, norm, 1.0)).max())
