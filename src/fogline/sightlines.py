"""Transmission along single sightlines: absorbers drawn one by one.

Absorbers above `LEAST_LOG_NHI` are drawn from a Poisson process with the intensity f dX/dz of a
posterior draw, each with a redshift and a column density of its own; their Lyman-continuum depths
add up wavelength by wavelength. Absorbers below take out less than a hundredth of the light each
(τ_912 < 0.02), and enter by their mean; so do the lines of the Lyman series, whose scatter within a
filter is small beside that of the continuum. The mean over sightlines is exp(-τ) of
`fogline.sightline_depth` (a test compares them).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_LIMIT, photoionization_cross_section
from fogline.filters import Filter
from fogline.quantities.base import Setting
from fogline.response import raw_predictions
from fogline.sightline_depth import depth_block

Array = NDArray[np.float64]

LEAST_LOG_NHI: Final = 15.5
"""Lowest column that is drawn [dex of cm^-2]."""

COLUMN_STEP: Final = 0.05
"""Cells of the intensity in log N [dex]; within one a column is drawn evenly in log N."""

REDSHIFT_CELLS: Final = 40
"""Cells of the intensity in redshift."""


@dataclass(frozen=True)
class Passband:
    """A filter in front of a source, and the optical depth that is the same on every sightline.

    Parameters
    ----------
    filter : Filter
    z : float
        Redshift of the source.
    setting : Setting
    """

    filter: Filter
    z: float
    setting: Setting

    def mean(self, theta: Array) -> Array:
        """Return the mean transmission of every parameter vector, shape (n,)."""
        wavelength, weights = self.filter.nodes(self.z)
        return np.exp(-self._depth(theta, wavelength, None)) @ weights

    def draw(self, theta: Array, per_draw: int, rng: np.random.Generator) -> Array:
        """Return the transmission of single sightlines.

        Parameters
        ----------
        theta : ndarray, shape (n, n_parameters or more)
        per_draw : int
            Sightlines of each parameter vector.
        rng : numpy.random.Generator

        Returns
        -------
        ndarray, shape (n * per_draw,)
        """
        wavelength, weights = self.filter.nodes(self.z)
        lowest = self.setting.column_range[0]
        least = max(LEAST_LOG_NHI, lowest)
        # Lines of all columns, and the continuum of the low ones.
        smooth = self._depth(theta, wavelength, (lowest, least) if least > lowest else (0.0, 0.0))
        single = self._drawn_depth(theta, wavelength, least, per_draw, rng)
        depth = np.repeat(smooth, per_draw, axis=0) + single
        return np.asarray(np.exp(-depth) @ weights)

    def _depth(
        self, theta: Array, wavelength: Array, continuum: tuple[float, float] | None
    ) -> Array:
        """Return τ of lines and of the continuum of a range of columns, (n, n_wavelengths)."""
        sightline = [(self.z, wavelength)]
        lines = depth_block(sightline, self.setting, continuum=False)
        depth = raw_predictions(self.setting, lines, theta)
        if continuum is None or continuum[1] > continuum[0]:
            block = depth_block(sightline, self.setting, lines=(), columns=continuum)
            depth = depth + raw_predictions(self.setting, block, theta)
        return depth

    def _drawn_depth(
        self, theta: Array, wavelength: Array, least: float, per_draw: int, rng: np.random.Generator
    ) -> Array:
        """Return the continuum's τ of drawn absorbers, shape (n * per_draw, n_wavelengths)."""
        n_sightlines = len(theta) * per_draw
        depth = np.zeros((n_sightlines, len(wavelength)))
        z_912 = wavelength / LYMAN_LIMIT - 1.0
        z_near = max(float(z_912.min()), 0.0)
        if z_near >= self.z:
            return depth
        sightline, z, log_nhi = self._absorbers(theta, z_near, least, per_draw, rng)
        ratio = (1.0 + z[:, None]) * LYMAN_LIMIT / wavelength
        each = 10.0 ** log_nhi[:, None] * photoionization_cross_section(ratio)
        # Absorbers come sightline by sightline: their depths are summed between the borders.
        ends = np.searchsorted(sightline, np.arange(n_sightlines + 1))
        busy = ends[1:] > ends[:-1]
        if busy.any():
            depth[busy] = np.add.reduceat(each, ends[:-1][busy], axis=0)
        return depth

    def _absorbers(
        self, theta: Array, z_near: float, least: float, per_draw: int, rng: np.random.Generator
    ) -> tuple[NDArray[np.int64], Array, Array]:
        """Draw absorbers: sightline (sorted), redshift and log N of each."""
        z_edges = np.linspace(z_near, self.z, REDSHIFT_CELLS + 1)
        top = self.setting.column_range[1]
        n_columns = max(1, round((top - least) / COLUMN_STEP))
        log_edges = np.linspace(least, top, n_columns + 1)
        z_mid, log_mid = (0.5 * (e[1:] + e[:-1]) for e in (z_edges, log_edges))
        cells = np.repeat(z_mid, n_columns), np.tile(log_mid, REDSHIFT_CELLS)
        path = self.setting.cosmology.dx_dz(cells[0]) * (z_edges[1] - z_edges[0])
        d_nhi = np.diff(10.0**log_edges)
        measure = path * np.tile(d_nhi, REDSHIFT_CELLS)
        found = []
        for i, vector in enumerate(theta):
            f = 10.0 ** self.setting.distribution.log_f(vector, cells[1], cells[0])
            cumulative = np.cumsum(f * measure)
            counts = rng.poisson(cumulative[-1], per_draw)
            cell = np.searchsorted(cumulative, rng.random(counts.sum()) * cumulative[-1])
            sightline = np.repeat(np.arange(per_draw) + i * per_draw, counts)
            jitter = rng.random((2, len(cell))) - 0.5
            z = cells[0][cell] + jitter[0] * (z_edges[1] - z_edges[0])
            log_nhi = cells[1][cell] + jitter[1] * (log_edges[1] - log_edges[0])
            found.append((sightline, z, log_nhi))
        sightline, z, log_nhi = (np.concatenate(part) for part in zip(*found, strict=True))
        return sightline, z, log_nhi
