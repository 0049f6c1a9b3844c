"""The prior, and the map from a unit normal to parameters.

Sampling runs in coordinates x whose prior is a unit normal in every direction: no walls, and the
prior is the natural over-dispersed start. A scipy frozen distribution D gives θ = D.ppf(Φ(x)).

The spline's prior says what is known of its shape: log10 f at one pivot (the anchor), then the
logarithmic slopes β = −d log f / d log N of the intervals, from the anchor outwards. As a ``walk``
every slope is its neighbour's plus a step, as ``independent`` slopes each has the same prior; both
are cut to β > 0, so that f falls with N. Where the data are silent, the posterior shows the prior.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri

from fogline.distribution import ColumnDistribution
from fogline.distributions import frozen
from fogline.doppler import DopplerGrid, doppler_grid
from fogline.nuisances import Nuisance
from fogline.settings import Distribution, ModelSettings

Array = NDArray[np.float64]
Quantile = Callable[[Array, Array], Array]

FARTHEST = 30.0
"""Coordinates beyond this many σ of the prior are taken as this many."""

BELOW_ONE = float(np.nextafter(1.0, 0.0))
"""Largest tail probability: at 1 itself an unbounded distribution has its quantile at infinity."""


def unit_normal_map(spec: Distribution) -> Callable[[Array], Array]:
    """Return the map x → D.ppf(Φ(x)) of a distribution.

    Parameters
    ----------
    spec : mapping
        scipy name under ``dist`` and its arguments.
    """
    distribution = frozen(spec)
    if spec["dist"] == "norm":
        loc, scale = distribution.mean(), distribution.std()
        return lambda x: loc + scale * x
    # Each half from its own tail, or quantiles beyond 8σ would round to infinity.
    return lambda x: np.where(
        x < 0.0,
        distribution.ppf(ndtr(np.minimum(x, 0.0))),
        distribution.isf(ndtr(-np.maximum(x, 0.0))),
    )


def cut_quantile(spec: Distribution) -> Quantile:
    """Return (x, floor) → quantile Φ(x) of a distribution cut to values above a floor.

    Parameters
    ----------
    spec : mapping
        scipy name under ``dist`` and its arguments.
    """
    distribution: Any = frozen(spec)
    if spec["dist"] == "norm":
        loc, scale = distribution.mean(), distribution.std()
        # sf and isf through ndtr and ndtri: this runs once per slope in the hot loop.
        return lambda x, floor: (
            loc - scale * ndtri(np.minimum(ndtr(-x) * ndtr((loc - floor) / scale), BELOW_ONE))
        )
    return lambda x, floor: distribution.isf(
        np.minimum(ndtr(-x) * distribution.sf(floor), BELOW_ONE)
    )


def positive_map(spec: Distribution) -> Callable[[Array], Array]:
    """Return the map x → quantile Φ(x) of a distribution cut to positive values.

    Parameters
    ----------
    spec : mapping
        scipy name under ``dist`` and its arguments.
    """
    quantile = cut_quantile(spec)
    return lambda x: quantile(x, np.zeros(len(x)))


@dataclass(frozen=True)
class Prior:
    """Prior of the parameter vector θ.

    Its entries: log f at the pivots, exponents of every redshift segment, shape of the form of high
    columns, free Doppler argument, nuisance parameters of the data sets.

    Parameters
    ----------
    model : ModelSettings
        Pivots and priors.
    nuisances : tuple of Nuisance
        Nuisance parameters.
    """

    model: ModelSettings
    nuisances: tuple[Nuisance, ...] = ()

    @property
    def n_dim(self) -> int:
        """Number of coordinates x, equal to the number of parameters."""
        return len(self.names)

    @cached_property
    def names(self) -> tuple[str, ...]:
        """Names of the parameters, in order."""
        doppler = () if self._doppler is None else (self._doppler.name,)
        nuisances = tuple(nuisance.name for nuisance in self.nuisances)
        return (*self._distribution.names, *doppler, *nuisances)

    @cached_property
    def _distribution(self) -> ColumnDistribution:
        return ColumnDistribution.from_settings(self.model)

    @cached_property
    def _doppler(self) -> DopplerGrid | None:
        return doppler_grid(self.model.doppler)

    @property
    def coordinate_names(self) -> tuple[str, ...]:
        """Names of the coordinates x, in order: anchor, slopes, then the other parameters."""
        model = self.model
        return (
            f"anchor[{model.prior.anchor_log_nhi}]",
            *(f"slope[{lo}-{hi}]" for lo, hi in pairwise(model.pivots)),
            *self.names[len(model.pivots) :],
        )

    @cached_property
    def _anchor_index(self) -> int:
        return self.model.pivots.index(self.model.prior.anchor_log_nhi)

    @cached_property
    def _maps(self) -> tuple[Callable[[Array], Array], Quantile, Quantile]:
        prior = self.model.prior
        first = cut_quantile(prior.first_slope)
        step = cut_quantile(prior.slope_step) if prior.slope_step is not None else first
        return unit_normal_map(prior.anchor), first, step

    @cached_property
    def _other_maps(self) -> tuple[Callable[[Array], Array], ...]:
        """Maps of all parameters but the pivots'."""
        evolution, high = self.model.evolution, self.model.high_column
        free = [unit_normal_map(spec) for spec in evolution.priors] * (len(evolution.breaks) + 1)
        free += [unit_normal_map(spec) for spec in (high.priors if high else ())]
        positive = [self._doppler.prior] if self._doppler else []
        positive += [nuisance.prior for nuisance in self.nuisances]
        return (*free, *(positive_map(spec) for spec in positive))

    def ln_density(self, x: Array) -> Array:
        """Return the unit normal's ln density, shape (n,), at x, shape (n, n_dim)."""
        return np.asarray(-0.5 * (np.einsum("ij,ij->i", x, x) + self.n_dim * np.log(2.0 * np.pi)))

    def to_parameters(self, x: Array) -> Array:
        """Return the parameters that belong to unit-normal coordinates.

        Parameters
        ----------
        x : ndarray, shape (n, n_dim)

        Returns
        -------
        ndarray, shape (n, n_dim)
            log10 f at every pivot (decreasing), then the others.
        """
        n_pivots = len(self.model.pivots)
        # Proposals with heavy tails reach beyond 38σ, where Φ underflows; no sample ever does.
        x = np.clip(x, -FARTHEST, FARTHEST)
        theta = np.empty_like(x)
        theta[:, :n_pivots] = self._pivot_values(x[:, :n_pivots])
        for column, quantile in enumerate(self._other_maps, start=n_pivots):
            theta[:, column] = quantile(x[:, column])
        return theta

    def _pivot_values(self, x: Array) -> Array:
        """Return log f at the pivots; x[:, 0] is the anchor's, the others the slopes' in order."""
        anchor = self._maps[0]
        drops = self._slopes(x[:, 1:]) * np.diff(self.model.pivots)
        fall = np.zeros_like(x)
        np.cumsum(drops, axis=1, out=fall[:, 1:])
        at = self._anchor_index
        return np.asarray((anchor(x[:, 0]) + fall[:, at])[:, None] - fall)

    def _slopes(self, x: Array) -> Array:
        """Return β of every interval, shape (n, n_pivots - 1), from the anchor outwards."""
        _, first, step = self._maps
        zero = np.zeros(len(x))
        if self.model.prior.slope_kind == "independent":
            return np.stack([first(x[:, i], zero) for i in range(x.shape[1])], axis=1)
        slopes = np.empty_like(x)
        start = max(self._anchor_index - 1, 0)
        slopes[:, start] = first(x[:, start], zero)
        for i in range(start - 1, -1, -1):
            slopes[:, i] = slopes[:, i + 1] + step(x[:, i], -slopes[:, i + 1])
        for i in range(start + 1, x.shape[1]):
            slopes[:, i] = slopes[:, i - 1] + step(x[:, i], -slopes[:, i - 1])
        return slopes
