"""Transmission along single sightlines: absorbers drawn one by one.

Absorbers above `LEAST_LOG_NHI` are drawn from a Poisson process with the intensity f dX/dz of a
posterior draw, each with a redshift and a column density of its own. Their Lyman-continuum depths
add up wavelength by wavelength, and each of their lines blackens as much of the filter as it takes
out. Absorbers below are thin at the limit (τ_912 < 0.02), and enter by their mean. The mean over
sightlines is exp(-τ) of `fogline.sightline_depth` (a test compares them). Absorbers are drawn
without clustering.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_LIMIT, LYMAN_SERIES, photoionization_cross_section
from fogline.doppler import mean_equivalent_width
from fogline.filters import Filter
from fogline.line_blending import mean_blended_widths
from fogline.quantities.base import Setting
from fogline.response import raw_predictions
from fogline.sightline_depth import WHOLE_SERIES, depth_block

Array = NDArray[np.float64]

LEAST_LOG_NHI: Final = 15.5
"""Lowest column that is drawn [dex of cm^-2]."""

COLUMN_STEP: Final = 0.05
"""Cells of the intensity in log N [dex]; within one a column is drawn evenly in log N."""

BLACKEST: Final = 1.0 - 1e-9
"""Share of a bin that a line can blacken: its logarithm must stay finite."""

REDSHIFT_CELLS: Final = 60
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
        single = self._drawn_depth(theta, wavelength, least, per_draw, rng)
        if least > lowest:
            smooth = self._depth(theta, wavelength, (lowest, least))
            single += np.repeat(smooth, per_draw, axis=0)
        return np.asarray(np.exp(-single) @ weights)

    def _depth(self, theta: Array, wavelength: Array, columns: tuple[float, float] | None) -> Array:
        """Return the mean τ of a range of columns, shape (n, n_wavelengths)."""
        block = depth_block([(self.z, wavelength)], self.setting, columns=columns)
        return raw_predictions(self.setting, block, theta)

    def _drawn_depth(
        self, theta: Array, wavelength: Array, least: float, per_draw: int, rng: np.random.Generator
    ) -> Array:
        """Return τ of drawn absorbers, shape (n * per_draw, n_wavelengths)."""
        n_sightlines = len(theta) * per_draw
        depth = np.zeros((n_sightlines, len(wavelength)))
        longest = float(WHOLE_SERIES.max())
        z_near = max(float(wavelength.min()) / longest - 1.0, 0.0)
        if z_near >= self.z:
            return depth
        sightline, z, log_nhi = self._absorbers(theta, z_near, least, per_draw, rng)
        each = self._in_lines(wavelength, z, log_nhi)
        ratio = (1.0 + z[:, None]) * LYMAN_LIMIT / wavelength
        beyond = np.flatnonzero((ratio >= 1.0).any(axis=1))
        sigma = photoionization_cross_section(ratio[beyond])
        each[beyond] += 10.0 ** log_nhi[beyond, None] * sigma
        # Absorbers come sightline by sightline: their depths are summed between the borders.
        ends = np.searchsorted(sightline, np.arange(n_sightlines + 1))
        busy = ends[1:] > ends[:-1]
        if busy.any():
            depth[busy] = np.add.reduceat(each, ends[:-1][busy], axis=0)
        return depth

    def _in_lines(self, wavelength: Array, z: Array, log_nhi: Array) -> Array:
        """Return what lines of single absorbers take out of bins, as τ, (n, n_wavelengths).

        A line is a black trough as wide as the light that it takes out, at its own place.
        """
        half_bin = 0.5 * (wavelength[1] - wavelength[0])
        widths = self._line_widths(log_nhi)
        black = np.zeros((len(z), len(wavelength)))
        for line, share in zip(WHOLE_SERIES, widths, strict=True):
            centre = line * (1.0 + z)
            half = 0.5 * share * centre
            here = np.flatnonzero(
                (centre + half > wavelength[0] - half_bin)
                & (centre - half < wavelength[-1] + half_bin)
            )
            lo = np.maximum((centre - half)[here, None], wavelength - half_bin)
            hi = np.minimum((centre + half)[here, None], wavelength + half_bin)
            # Lines of one absorber stand side by side: what they take out adds up.
            black[here] += np.maximum((hi - lo) / (2.0 * half_bin), 0.0)
        return np.asarray(-np.log1p(-np.minimum(black, BLACKEST)))

    def _line_widths(self, log_nhi: Array) -> Array:
        """Return W/λ of every line of single absorbers, shape (n_lines, n)."""
        grid_of = self.setting.doppler_grid
        # A free Doppler argument is at the middle of its prior: scatter hardly depends on it.
        middle = None if grid_of is None else grid_of.settings[len(grid_of.settings) // 2]
        doppler = self.setting.doppler if middle is None else middle
        grid = np.linspace(LEAST_LOG_NHI - 0.1, self.setting.column_range[1], 120)
        rows = [
            mean_equivalent_width(grid, doppler, line) / line.wavelength for line in LYMAN_SERIES
        ]
        rows.extend(mean_blended_widths(grid, doppler))
        return np.exp(np.stack([np.interp(log_nhi, grid, np.log(row)) for row in rows]))

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
