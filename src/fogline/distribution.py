"""The column-density distribution f(N_HI, X, z): monotone spline in log N, power law in 1 + z.

Definition (N in cm^-2, f in cm^2)::

    log10 f(N, z) = S(log10 N) + γ(log10 N) log10[(1 + z) / (1 + z_ref)]

S is the monotone cubic Hermite spline through the pivots (`fogline.spline`); γ runs linearly
between the evolution pivots and is constant outside them. S is linear in the pivot values *and*
the slopes at the pivots, so that ln f at any set of points is one matrix product of the expanded
parameters (values, slopes, exponents) with a basis that is computed once.

Beyond the first and last pivot f is undefined, and asking for it is an error.
Agreement with a direct evaluation through scipy: ``tests/unit/test_distribution.py``.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fogline.settings import ModelSettings
from fogline.spline import HermiteSpline

Array = NDArray[np.float64]

LN10 = float(np.log(10.0))


@dataclass(frozen=True)
class ColumnDistribution:
    """Where f has its parameters; holds none of their values.

    The parameter vector θ is log10 f at every pivot at the reference redshift, then the exponent
    at every evolution pivot.

    Parameters
    ----------
    reference_redshift : float
        Redshift at which the pivots give f.
    pivots : tuple of float [dex of cm^-2]
        Strictly increasing.
    evolution_pivots : tuple of float [dex of cm^-2]
        Strictly increasing.
    """

    reference_redshift: float
    pivots: tuple[float, ...]
    evolution_pivots: tuple[float, ...]

    @classmethod
    def from_settings(cls, model: ModelSettings) -> ColumnDistribution:
        """Return the distribution that a config's ``model`` block describes."""
        return cls(model.reference_redshift, model.pivots, model.evolution.pivots)

    @cached_property
    def spline(self) -> HermiteSpline:
        """The spline through the pivots."""
        return HermiteSpline(np.array(self.pivots))

    @property
    def n_parameters(self) -> int:
        """Length of the parameter vector."""
        return len(self.pivots) + len(self.evolution_pivots)

    @property
    def names(self) -> tuple[str, ...]:
        """Parameter names, in order: ``log_f[12.0]`` ..., ``evolution[14.0]`` ..."""
        return tuple(f"log_f[{p}]" for p in self.pivots) + tuple(
            f"evolution[{p}]" for p in self.evolution_pivots
        )

    @property
    def kinks(self) -> tuple[float, ...]:
        """Columns [dex of cm^-2] at which f is not smooth; quadrature panels end there."""
        return tuple(sorted({*self.pivots, *self.evolution_pivots}))

    def expand(self, theta: ArrayLike) -> Array:
        """Return pivot values, slopes at the pivots and exponents side by side.

        Parameters
        ----------
        theta : array_like, shape (..., n_parameters)

        Returns
        -------
        ndarray, shape (..., 2 n_pivots + n_evolution_pivots)
        """
        theta = np.asarray(theta, dtype=float)
        values = theta[..., : len(self.pivots)]
        exponents = theta[..., len(self.pivots) :]
        return np.concatenate([values, self.spline.slopes(values), exponents], axis=-1)

    def basis(self, log_nhi: ArrayLike, z: ArrayLike) -> Array:
        """Return the matrix B for which ``ln f = expand(theta) @ B`` at the points (N, z).

        Parameters
        ----------
        log_nhi : array_like, shape (n_points,) [dex of cm^-2]
            Between the first and the last pivot.
        z : array_like, shape (n_points,)

        Returns
        -------
        ndarray, shape (2 n_pivots + n_evolution_pivots, n_points)
        """
        log_nhi = np.asarray(log_nhi, dtype=float)
        stretch = np.log10((1.0 + np.asarray(z, dtype=float)) / (1.0 + self.reference_redshift))
        hats = [
            np.interp(log_nhi, self.evolution_pivots, unit)
            for unit in np.eye(len(self.evolution_pivots))
        ]
        return LN10 * np.vstack([self.spline.basis(log_nhi), stretch * np.array(hats)])

    def log_f(self, theta: ArrayLike, log_nhi: ArrayLike, z: ArrayLike) -> Array:
        """Return log10 f(N, X, z).

        Parameters
        ----------
        theta : array_like, shape (..., n_parameters)
        log_nhi : array_like, shape (n_points,) [dex of cm^-2]
        z : array_like, shape (n_points,) or scalar

        Returns
        -------
        ndarray, shape (..., n_points) [dex of cm^2]
        """
        log_nhi, z = np.broadcast_arrays(np.asarray(log_nhi, float), np.asarray(z, float))
        return np.asarray(self.expand(theta) @ self.basis(log_nhi, z) / LN10)
