"""Sightlines that dust in absorbers hides from a magnitude-limited survey: a model, off by default.

An absorber of column N dims the quasar behind it by A = 1.086 k N / 10^21 mag, k being an assumed
optical depth (in the survey's band, observed) per 10^21 cm^-2. Of quasars with number counts

    dn/dm ∝ 1 / [10^(-b (m - m_b)) + 10^(-d (m - m_b))],     b bright, d faint slope,

a survey to magnitude m_lim finds the share n(< m_lim - A) / n(< m_lim) behind it. What was counted
is the distribution times this share; the correction divides by it. It knows nothing of dust that
varies from absorber to absorber at one column.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

MAGNITUDES_PER_DEPTH: Final = 2.5 / np.log(10.0)
FAINTEST_SPAN: Final = 25.0
"""Magnitudes over which counts are added up: brighter ones hold nothing."""


@dataclass(frozen=True)
class DustModel:
    """Number counts and magnitude limit of the survey that is corrected.

    Parameters
    ----------
    magnitude_limit, break_magnitude : float
        m_lim and m_b.
    bright_slope, faint_slope : float
        b and d of the counts, d log n / dm.
    optical_depth : mapping
        Prior of k, cut to positive values: a scipy distribution by name and arguments.
    """

    magnitude_limit: float
    break_magnitude: float
    bright_slope: float
    faint_slope: float
    optical_depth: Mapping[str, Any]

    def counts_below(self, magnitude: Array) -> Array:
        """Return the number of quasars brighter than magnitudes, up to a factor.

        Parameters
        ----------
        magnitude : ndarray
        """
        grid = np.linspace(self.magnitude_limit - FAINTEST_SPAN, self.magnitude_limit, 2001)
        x = grid - self.break_magnitude
        density = 1.0 / (10.0 ** (-self.bright_slope * x) + 10.0 ** (-self.faint_slope * x))
        steps = 0.5 * (density[1:] + density[:-1]) * (grid[1] - grid[0])
        # In logarithms, in which the counts are nearly straight.
        ln_total = np.log(np.cumsum(steps))
        return np.exp(np.interp(magnitude, grid[1:], ln_total))

    def kept(self, log_nhi: Array, optical_depth: Array) -> Array:
        """Return the share of quasars that a survey still finds behind absorbers.

        Parameters
        ----------
        log_nhi : ndarray, shape (n_columns,) [dex of cm^-2]
        optical_depth : ndarray, shape (n,)
            k.

        Returns
        -------
        ndarray, shape (n, n_columns)
        """
        dimming = MAGNITUDES_PER_DEPTH * optical_depth[:, None] * 10.0 ** (log_nhi - 21.0)
        # Beyond the span of the counts nothing is found; a floor keeps the correction finite.
        dimming = np.minimum(dimming, 0.8 * FAINTEST_SPAN)
        found = self.counts_below(self.magnitude_limit - dimming)
        return np.asarray(found / self.counts_below(np.array(self.magnitude_limit)))
