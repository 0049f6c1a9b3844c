"""Student-t mixture: proposal of the independence move and of the evidence.

The density is a weighted sum of multivariate Student-t components with one number of degrees of
freedom; its tails fall as a power, so that no point of the posterior is out of reach of it
(normal components leave walkers stuck in their own tails). `fogline.mixture_fit` fits it.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_triangular
from scipy.special import gammaln

Array = NDArray[np.float64]


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


def ln_sum(ln_part: Array) -> Array:
    """Return ln of the sum over components (C, n); scipy's logsumexp is far slower here."""
    top = ln_part.max(axis=0)
    return np.asarray(top + np.log(np.exp(ln_part - top).sum(axis=0)))
