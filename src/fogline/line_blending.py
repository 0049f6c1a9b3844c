"""The crowded end of the Lyman series: lines that overlap, and how they pass into the continuum.

Lines 1 → n lie 2/n^3 of their wavelength apart. From n = 13 on that is less than 270 km/s, and the
saturated lines of one thick absorber overlap: their equivalent widths must not be added. Here the
lines above n = 12 are one profile,

    σ(λ) = Σ_{n=13}^{m} σ_n(λ) + SIGMA_912 erfc[(ln λ − ln λ_edge) c / b] / 2,

and what an absorber takes out is ∫ {1 − exp[−N σ(λ)]} d ln λ from the Lyman limit redwards. The
integral is cut into cells, one around each line up to `LAST_CELL` and one from there to the limit,
so that each cell is a line of width W/λ at its wavelength. Lines beyond m, which are closer
together than b/2, are taken as merged: oscillator strength per frequency is continuous across the
limit, so the mean cross-section there is that of the limit, down to λ_edge, halfway (in n) between
lines m and m+1.

Adding the widths of separate lines n = 13 to 40 instead is 9% too little for thin absorbers (the
lines beyond) and twice too much at log N = 19.5, thrice at 23 (b = 26 km/s).

Accuracy against the sum of hundreds of lines: 7e-4 for 12 <= log N <= 22 and b from 5 to 150 km/s
(``tests/unit/test_line_blending.py``). Left out: the overlap with and among the lines up to n = 12,
below 1e-3 of their widths up to log N = 21 for b = 26 km/s, but 2% there for b = 60.

References
----------
Continuity of the oscillator strength at a series limit: textbook, e.g. Bethe & Salpeter 1957,
Quantum Mechanics of One- and Two-Electron Atoms, section 71 (status: memory).
"""

from __future__ import annotations

from collections.abc import Mapping
from itertools import pairwise
from typing import Any, Final

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special
from scipy.linalg import block_diag

from fogline.atomic import LYMAN_LIMIT, LYMAN_SERIES, SIGMA_912, lyman_series
from fogline.constants import ANGSTROM_CM, C_CGS, KM_CM, LINE_AREA
from fogline.doppler import doppler_average
from fogline.quadrature import interval_nodes

Array = NDArray[np.float64]

FIRST_LEVEL: Final = LYMAN_SERIES[-1].n + 1
LAST_CELL: Final = 24
"""Highest upper level with a cell of its own; from there to the limit it is 1.4 Å."""

_HIGHEST_RESOLVED: Final = 80
_PANELS_PER_WIDTH: Final = 2.0
_PANEL_NODES: Final = 6
_RED_MARGIN: Final = 12.0  # [Doppler widths] beyond the first line
_LEAST_B: Final = 2.0  # [km/s] narrower lines do not occur; keeps nodes few
_COLUMNS_AT_ONCE: Final = 64


def edge_above(n: int) -> float:
    """Return the wavelength [Angstrom] halfway, in n, between the lines n and n + 1."""
    return LYMAN_LIMIT / (1.0 - 1.0 / (n + 0.5) ** 2)


BLENDED_WAVELENGTHS: Final = np.array(
    [line.wavelength for line in lyman_series(LAST_CELL) if line.n >= FIRST_LEVEL]
    + [np.sqrt(LYMAN_LIMIT * edge_above(LAST_CELL))]
)
"""Wavelengths [Angstrom] of the cells: lines 13 to `LAST_CELL`, then all beyond."""


def mean_blended_widths(log_nhi: ArrayLike, settings: Mapping[str, Any]) -> Array:
    """Return the widths of the cells averaged over the Doppler parameter.

    Parameters
    ----------
    log_nhi : array_like, shape (n_columns,) [dex of cm^-2]
    settings : mapping
        As `fogline.doppler.doppler_average` takes it.

    Returns
    -------
    ndarray, shape (n_cells, n_columns)
        W/λ, dimensionless, at `BLENDED_WAVELENGTHS`.
    """
    nodes, weights = doppler_average(settings)
    mean = np.zeros((len(BLENDED_WAVELENGTHS), np.size(log_nhi)))
    for b, weight in zip(nodes, weights, strict=True):
        mean += weight * blended_widths(log_nhi, float(b))
    return mean


def blended_widths(log_nhi: ArrayLike, b: float) -> Array:
    """Return what lines above n = 12 take out of the light together, cell by cell.

    Parameters
    ----------
    log_nhi : array_like, shape (n_columns,) [dex of cm^-2]
    b : float [km / s]
        Doppler parameter.

    Returns
    -------
    ndarray, shape (n_cells, n_columns)
        W/λ, dimensionless, at `BLENDED_WAVELENGTHS`.
    """
    b = max(b, _LEAST_B)
    ln_wave, share = _nodes(b)
    sigma = _cross_section(ln_wave, b)
    columns = 10.0 ** np.atleast_1d(np.asarray(log_nhi, dtype=float))
    parts = [
        share @ -np.expm1(-sigma[:, None] * columns[i : i + _COLUMNS_AT_ONCE])
        for i in range(0, len(columns), _COLUMNS_AT_ONCE)
    ]
    return np.concatenate(parts, axis=1)


def _nodes(b: float) -> tuple[Array, Array]:
    """Return ln λ of all nodes, and their weights in each cell, shape (n_cells, n_nodes)."""
    width = b * KM_CM / C_CGS
    first = np.log(BLENDED_WAVELENGTHS[0]) + _RED_MARGIN * width
    between = [np.log(edge_above(n)) for n in range(FIRST_LEVEL, LAST_CELL + 1)]
    borders = [first, *between, np.log(LYMAN_LIMIT)]
    panels = [_panels(lo, hi, width) for hi, lo in pairwise(borders)]
    ln_wave = np.concatenate([nodes for nodes, _ in panels])
    return ln_wave, block_diag(*(weights for _, weights in panels))


def _panels(lo: float, hi: float, width: float) -> tuple[Array, Array]:
    edges = np.linspace(lo, hi, 1 + int(np.ceil(_PANELS_PER_WIDTH * (hi - lo) / width)))
    parts = [interval_nodes(a, b, _PANEL_NODES) for a, b in pairwise(edges)]
    nodes, weights = (np.concatenate(part) for part in zip(*parts, strict=True))
    return nodes, weights


def _cross_section(ln_wave: Array, b: float) -> Array:
    """Return the cross-section [cm^2] of all lines above n = 12 together."""
    b_cgs = b * KM_CM
    # The spacing 2 c / n^3 falls to b/2 here.
    resolved = int(np.clip(np.ceil((4.0 * C_CGS / b_cgs) ** (1 / 3)), LAST_CELL, _HIGHEST_RESOLVED))
    from_edge = (ln_wave - np.log(edge_above(resolved))) * C_CGS / b_cgs
    sigma = 0.5 * SIGMA_912 * special.erfc(from_edge)
    for line in lyman_series(resolved)[FIRST_LEVEL - 2 :]:
        wavelength_cm = line.wavelength * ANGSTROM_CM
        x = (ln_wave - np.log(line.wavelength)) * C_CGS / b_cgs
        damping = line.gamma * wavelength_cm / (4.0 * np.pi * b_cgs)
        scale = LINE_AREA * line.f * wavelength_cm / (np.sqrt(np.pi) * b_cgs)
        sigma += scale * special.wofz(x + 1j * damping).real
    return np.asarray(sigma)
