"""What all derived quantities share: integrals over columns in the cosmology of the results."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from fogline.dust import DustModel
from fogline.filters import LYMAN_CONTINUUM, Filter
from fogline.local_sources import Spectrum
from fogline.quadrature import column_nodes
from fogline.quantities.base import Block, Setting
from fogline.response import raw_predictions
from fogline.settings import DeriveSettings
from fogline.tables import Curve

Array = NDArray[np.float64]

LLS_LOG_NHI = 17.2
"""τ_912 = 1, to the two digits in common use: lower end of the Lyman-limit systems."""

SUB_DLA_LOG_NHI = 19.0
DLA_LOG_NHI = 20.3
"""Common practice: sub-DLAs from 10^19, DLAs from 2 × 10^20 cm^-2."""

SIGHTLINE_DRAWS = 100
"""Posterior draws among which sightlines are shared out, at most."""

COLUMN_STEP = 0.05
"""Spacing of tables along log N [dex]."""


@dataclass(frozen=True)
class Draws:
    """Parameter vectors and the setting in which they are turned into derived quantities.

    Parameters
    ----------
    theta : ndarray, shape (n_draws, n_parameters)
    setting : Setting
    derive : DeriveSettings
    filters : tuple of Filter
        For transmissions through filters.
    seed : int
        Of whatever is drawn at random.
    background_kind : str
        Kind of the given background or emissivity; empty where none is given.
    background : mapping of str to ndarray
        Its columns ``z value err``.
    highest_column : float, optional [dex of cm^-2]
        Upper end of the columns that any data set counted.
    """

    theta: Array
    setting: Setting
    derive: DeriveSettings
    filters: tuple[Filter, ...] = (LYMAN_CONTINUUM,)
    seed: int = 0
    background_kind: str = ""
    background: Mapping[str, Array] = field(default_factory=dict)
    highest_column: float | None = None

    @cached_property
    def _made(self) -> dict[str, Array]:
        return {}

    def memo(self, name: str, make: Callable[[], Array]) -> Array:
        """Return what several tables need and one of them has made already.

        Parameters
        ----------
        name : str
        make : callable
            Makes it where nobody has.
        """
        if name not in self._made:
            self._made[name] = make()
        return self._made[name]

    @property
    def spectrum(self) -> Spectrum:
        """Spectrum of the sources."""
        background = self.derive.background
        return Spectrum(float(background["spectral_index"]), float(background["x_max"]))

    @property
    def dust(self) -> DustModel | None:
        """Model of the sightlines that dust hides; None where none is configured."""
        return None if self.derive.dust is None else DustModel(**self.derive.dust)

    @property
    def sightline_draws(self) -> int:
        """Posterior draws among which sightlines are shared out."""
        return min(self.derive.sightlines, SIGHTLINE_DRAWS)

    @property
    def sightlines_per_draw(self) -> int:
        """Sightlines of each of them."""
        return -(-self.derive.sightlines // self.sightline_draws)

    @property
    def z(self) -> Array:
        """Redshifts of tables along z."""
        return np.array(self.derive.redshifts)

    def column_grid(self) -> Array:
        """Return log N of tables along column density, from the first pivot to the last."""
        lo, hi = self.setting.column_range
        return np.linspace(lo, hi, 1 + round((hi - lo) / COLUMN_STEP))

    def column_keys(self) -> tuple[Array, Array]:
        """Return redshift and log N of every row of tables along column density."""
        grid = self.column_grid()
        z = np.array(self.derive.column_redshifts)
        return np.repeat(z, len(grid)), np.tile(grid, len(z))

    def f(self, log_nhi: Array, z: Array | float) -> Array:
        """Return f(N, X, z) [cm^2] at points, shape (n_draws, n_points)."""
        return 10.0 ** self.setting.distribution.log_f(self.theta, log_nhi, z)

    def integrate(self, block: Block) -> Array:
        """Return the raw predictions of a block, shape (n_draws, n_raw)."""
        return raw_predictions(self.setting, block, self.theta)

    def clip(self, lo: float, hi: float) -> tuple[float, float]:
        """Return a column range cut to the pivots; empty where it lies outside."""
        first, last = self.setting.column_range
        return min(max(lo, first), last), max(min(hi, last), first)

    def column_integral(
        self, lo: float, hi: float, kernel: Callable[[Array], Array] = np.ones_like
    ) -> Array:
        """Return ∫ f K(N) dN between two columns, at every redshift of `z`.

        Parameters
        ----------
        lo, hi : float [dex of cm^-2]
            Cut to the pivots; zero where nothing is left.
        kernel : callable
            K as a function of log N.

        Returns
        -------
        ndarray, shape (n_draws, n_z)
        """
        lo, hi = self.clip(lo, hi)
        if lo >= hi:
            return np.zeros((len(self.theta), len(self.z)))
        log_nhi, d_nhi = column_nodes(lo, hi, self.setting.distribution.kinks)
        weights = kernel(log_nhi) * d_nhi
        # One redshift at a time: f for all of them would take n_z times the memory.
        return np.stack([self.f(log_nhi, z) @ weights for z in self.z], axis=1)


class DerivedTable(Protocol):
    """What the workflow asks of a derived table."""

    name: str
    """Stem of its file."""

    definition: str
    """Definition and caution, for the table's meta."""

    def keys(self, draws: Draws) -> Mapping[str, tuple[Any, str, str]]:
        """Return the leading columns."""
        ...

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return the curves, one value a draw and row."""
        ...
