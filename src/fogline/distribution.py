"""The column-density distribution f(N_HI, X, z): monotone spline in log N, power laws in 1 + z.

Definition (N in cm^-2, f in cm^2)::

    log10 f(N, z) = S(log10 N) + Σ_k γ_k(log10 N) s_k(z)
    s_k(z) = [u(z)]_k - [u(z_ref)]_k,   u = log10(1 + z),   [u]_k = u held within segment k

S is the monotone cubic Hermite spline through the pivots (`fogline.spline`). Breaks in redshift cut
the axis into segments, each with an exponent γ_k of its own; without breaks the sum is the single
power law γ(N) log10[(1+z)/(1+z_ref)]. Every γ_k runs linearly in log N between the evolution
pivots and is constant outside them. f is continuous everywhere.

S is linear in the pivot values *and* the slopes at the pivots, so that ln f at any set of
points is one matrix product of the expanded parameters (values, slopes, exponents) with a basis
that is computed once. A form of `fogline.high_columns` may take the spline's place above the last
pivot; it is added to that product at its own points.

Beyond the first pivot and the upper end f is undefined, and asking for it is an error.
Agreement with a direct evaluation through scipy: ``tests/unit/test_distribution.py``.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fogline.high_columns import FORMS, LN10, HighColumnForm
from fogline.settings import ModelSettings
from fogline.spline import HermiteSpline

__all__ = ["LN10", "ColumnDistribution", "Points"]

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Points:
    """Points (N, z) prepared for evaluations of f.

    Parameters
    ----------
    basis : ndarray, shape (n_expanded, n_points)
        ``ln f = expanded @ basis``, but for the form of high columns.
    high : ndarray of int, shape (n_high,)
        Points above the join of spline and form.
    log_nhi : ndarray, shape (n_columns,) [dex of cm^-2]
        Their columns, each once: many points share one at different redshifts.
    column : ndarray of int, shape (n_high,)
        Which of them each point has.
    """

    basis: Array
    high: NDArray[np.int64]
    log_nhi: Array
    column: NDArray[np.int64]


@dataclass(frozen=True)
class ColumnDistribution:
    """Where f has its parameters; holds none of their values.

    The parameter vector θ is log10 f at every pivot at the reference redshift, then the exponents
    (those of all evolution pivots below the first break, then above it, ...), then the shape
    parameters of the form of high columns. Entries beyond `n_parameters` are not f's.

    Parameters
    ----------
    reference_redshift : float
        Redshift at which the pivots give f.
    pivots : tuple of float [dex of cm^-2]
        Strictly increasing; the last is the join where there is a form.
    evolution_pivots : tuple of float [dex of cm^-2]
        Strictly increasing.
    breaks : tuple of float
        Redshifts at which exponents change, increasing.
    form : str
        Name in `fogline.high_columns.FORMS`; empty where the spline goes all the way.
    top : float, optional [dex of cm^-2]
        Upper end of f where there is a form.
    """

    reference_redshift: float
    pivots: tuple[float, ...]
    evolution_pivots: tuple[float, ...]
    breaks: tuple[float, ...] = ()
    form: str = ""
    top: float | None = None

    @classmethod
    def from_settings(cls, model: ModelSettings) -> ColumnDistribution:
        """Return the distribution that a config's ``model`` block describes."""
        high = model.high_column
        return cls(
            model.reference_redshift,
            model.pivots,
            model.evolution.pivots,
            model.evolution.breaks,
            "" if high is None else high.form,
            None if high is None else high.top,
        )

    @cached_property
    def spline(self) -> HermiteSpline:
        """The spline through the pivots."""
        return HermiteSpline(np.array(self.pivots))

    @property
    def high_form(self) -> HighColumnForm | None:
        """The form above the last pivot."""
        return FORMS[self.form] if self.form else None

    @property
    def column_range(self) -> tuple[float, float]:
        """Lowest and highest column at which f is defined [dex of cm^-2]."""
        return self.pivots[0], self.pivots[-1] if self.top is None else self.top

    @property
    def shape(self) -> tuple[int, int, int]:
        """Numbers of pivots, of exponents and of shape parameters."""
        n_exponents = len(self.evolution_pivots) * (len(self.breaks) + 1)
        return len(self.pivots), n_exponents, len(self.high_form.names) if self.high_form else 0

    @property
    def n_parameters(self) -> int:
        """Number of parameters of f."""
        return sum(self.shape)

    @property
    def segments(self) -> tuple[str, ...]:
        """Redshift segments in words; a single empty text where there is no break."""
        if not self.breaks:
            return ("",)
        inner = [f"{lo:g}<z<{hi:g}" for lo, hi in pairwise(self.breaks)]
        return (f"z<{self.breaks[0]:g}", *inner, f"z>{self.breaks[-1]:g}")

    @property
    def names(self) -> tuple[str, ...]:
        """Parameter names, in order: ``log_f[12.0]`` ..., ``evolution[14.0]`` ..."""
        exponents = [
            f"evolution[{pivot}{', ' if segment else ''}{segment}]"
            for segment in self.segments
            for pivot in self.evolution_pivots
        ]
        shape = [f"{self.form}[{name}]" for name in (self.high_form.names if self.form else ())]  # type: ignore[union-attr]
        return (*(f"log_f[{p}]" for p in self.pivots), *exponents, *shape)

    @property
    def kinks(self) -> tuple[float, ...]:
        """Columns [dex of cm^-2] at which quadrature panels end: f is not smooth there.

        Above the join they are as dense as the form needs.
        """
        kinks = {*self.pivots, *self.evolution_pivots}
        if self.high_form:
            lo, hi = self.pivots[-1], self.column_range[1]
            n_panels = max(1, round((hi - lo) / self.high_form.panel))
            kinks |= {float(x) for x in np.linspace(lo, hi, n_panels + 1)}
        return tuple(sorted(kinks))

    def expand(self, theta: ArrayLike) -> Array:
        """Return values, slopes at the pivots, exponents and shape parameters side by side.

        Parameters
        ----------
        theta : array_like, shape (..., n_parameters or more)

        Returns
        -------
        ndarray, shape (..., n_expanded)
        """
        theta = np.asarray(theta, dtype=float)
        values = theta[..., : len(self.pivots)]
        rest = theta[..., len(self.pivots) : self.n_parameters]
        return np.concatenate([values, self.spline.slopes(values), rest], axis=-1)

    def basis(self, log_nhi: ArrayLike, z: ArrayLike) -> Array:
        """Return the matrix B for which ``ln f = expand(theta) @ B`` at the points (N, z).

        Parameters
        ----------
        log_nhi : array_like, shape (n_points,) [dex of cm^-2]
            Within `column_range`; above the join B gives f at the join.
        z : array_like, shape (n_points,)

        Returns
        -------
        ndarray, shape (n_expanded, n_points)
        """
        log_nhi = np.asarray(log_nhi, dtype=float)
        if self.form and (log_nhi > self.column_range[1] + 1e-9).any():
            raise ValueError(f"f is undefined above log N = {self.column_range[1]:g}")
        hats = np.array(
            [
                np.interp(log_nhi, self.evolution_pivots, unit)
                for unit in np.eye(len(self.evolution_pivots))
            ]
        )
        on_spline = np.minimum(log_nhi, self.pivots[-1]) if self.form else log_nhi
        stretched = [stretch * hats for stretch in self._stretches(np.asarray(z, dtype=float))]
        idle = np.zeros((self.shape[2], log_nhi.size))
        return LN10 * np.vstack([self.spline.basis(on_spline), *stretched, idle])

    def _stretches(self, z: Array) -> list[Array]:
        """Return s_k(z) of every segment."""
        u, u_ref = np.log10(1.0 + z), np.log10(1.0 + self.reference_redshift)
        edges = [-np.inf, *np.log10(1.0 + np.array(self.breaks)), np.inf]
        return [np.clip(u, lo, hi) - np.clip(u_ref, lo, hi) for lo, hi in pairwise(edges)]

    def points(self, log_nhi: ArrayLike, z: ArrayLike) -> Points:
        """Return points prepared for `ln_f`.

        Parameters
        ----------
        log_nhi : array_like, shape (n_points,) [dex of cm^-2]
        z : array_like, shape (n_points,)
        """
        log_nhi = np.asarray(log_nhi, dtype=float)
        high = np.flatnonzero(log_nhi > self.pivots[-1]) if self.form else np.empty(0, np.int64)
        basis = np.ascontiguousarray(self.basis(log_nhi, z))
        columns, which = np.unique(log_nhi[high], return_inverse=True)
        return Points(basis, high, columns, which)

    def ln_f(self, expanded: Array, points: Points) -> Array:
        """Return ln f at prepared points.

        Parameters
        ----------
        expanded : ndarray, shape (n, n_expanded)
            From `expand`.
        points : Points

        Returns
        -------
        ndarray, shape (n, n_points)
        """
        ln_f = expanded @ points.basis
        if self.form:
            ln_f[:, points.high] += self.ln_shape(expanded, points)
        return ln_f

    def ln_shape(self, expanded: Array, points: Points) -> Array:
        """Return what the form adds to ln f at its own points, shape (n, n_high)."""
        assert self.high_form is not None
        parameters = expanded[:, expanded.shape[1] - self.shape[2] :]
        shape = self.high_form.ln_shape(parameters, points.log_nhi, self.pivots[-1])
        return shape[:, points.column]

    def log_f(self, theta: ArrayLike, log_nhi: ArrayLike, z: ArrayLike) -> Array:
        """Return log10 f(N, X, z).

        Parameters
        ----------
        theta : array_like, shape (..., n_parameters or more)
        log_nhi : array_like, shape (n_points,) [dex of cm^-2]
        z : array_like, shape (n_points,) or scalar

        Returns
        -------
        ndarray, shape (..., n_points) [dex of cm^2]
        """
        log_nhi, z = np.broadcast_arrays(np.asarray(log_nhi, float), np.asarray(z, float))
        expanded = self.expand(theta)
        flat = expanded.reshape(-1, expanded.shape[-1])
        log_f = self.ln_f(flat, self.points(log_nhi, z)) / LN10
        return log_f.reshape(*expanded.shape[:-1], -1)
