"""Mean optical depth towards a source, in lines and continuum, at observed wavelengths.

The mean transmission over all sightlines is exp(-τ) with

    τ(λ) = τ_LC(λ) + Σ_j (1+z_j) (dX/dz) ∫ f(N, z_j) W_j / λ_j dN,     1 + z_j = λ / λ_j < 1 + z_em,

j over the Lyman series (the lines above n = 12, which overlap in one thick absorber, as cells of
`fogline.line_blending`), and the Lyman continuum of all absorbers between
z_912 = λ / λ_912 - 1 (or redshift 0 where that is negative) and the source. For the continuum the
exponential of this mean is exact: absorbers are Poisson distributed, and each takes out its share
1 - exp(-N σ) whatever the others do. Lines are taken in the same way, as equivalent widths spread
evenly over the wavelengths where they fall, which holds for means over many sightlines.

Everything is linear in f, on the nodes of `fogline.unit_depth` (f interpolated in ln(1+z)).
Accuracy against adaptive quadrature: ``tests/properties/test_sightline_depth.py``.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fogline.atomic import LYMAN_LIMIT, LYMAN_SERIES, LymanLine
from fogline.doppler import mean_equivalent_width
from fogline.line_blending import BLENDED_WAVELENGTHS, mean_blended_widths
from fogline.quadrature import column_nodes
from fogline.quantities.base import Block, Setting, over_doppler
from fogline.settings import Distribution
from fogline.unit_depth import continuum_weights, grid_interpolation, redshift_grid

Array = NDArray[np.float64]

WHOLE_SERIES: Final[Array] = np.array(
    [*(line.wavelength for line in LYMAN_SERIES), *BLENDED_WAVELENGTHS]
)
"""Wavelengths [Angstrom] of the lines, or cells of overlapping lines, of the whole series."""


def depth_block(
    sightlines: Sequence[tuple[float, ArrayLike]],
    setting: Setting,
    *,
    lines: Sequence[LymanLine] | None = None,
    continuum: bool = True,
    columns: tuple[float, float] | None = None,
    **constants: Array,
) -> Block:
    """Return the optical depth towards sources as a block.

    Parameters
    ----------
    sightlines : sequence of (float, array_like)
        Redshift of each source, and observed wavelengths [Angstrom] towards it.
    setting : Setting
    lines : sequence of LymanLine, optional
        Lines that absorb, as if each were alone; none where empty. By default the whole series,
        with the overlap of its crowded end.
    continuum : bool
        Whether the Lyman continuum absorbs.
    columns : tuple of float, optional [dex of cm^-2]
        Range of the absorbers that count; all of f by default.
    **constants : ndarray
        Constants of the block.

    Returns
    -------
    Block
        One raw prediction, τ, for each wavelength of each source, in order.
    """
    wave = WHOLE_SERIES if lines is None else np.array([line.wavelength for line in lines])
    grid = redshift_grid(
        max(z for z, _ in sightlines), setting.distribution.breaks, _nearest(sightlines, wave)
    )
    # Nodes of the whole range, so that all weights share them; panels end at the limits.
    ends = columns or ()
    every = column_nodes(*setting.column_range, (*setting.distribution.kinks, *ends))[0]
    lo, hi = columns or setting.column_range
    counted = ((every > lo) & (every < hi)).astype(float)
    parts = []
    if continuum:
        depth = [_continuum(z, _wavelengths(w), grid, setting, ends) for z, w in sightlines]
        parts.append(np.concatenate(depth, axis=2))

    def build(doppler: Distribution) -> Block:
        widths = _widths(lines, every, setting, ends, doppler)
        in_lines = np.concatenate(
            [_lines(z, _wavelengths(w), grid, setting, wave, widths) for z, w in sightlines],
            axis=2,
        )
        weights = sum(parts, start=in_lines) * counted[:, None]
        return Block(
            log_nhi=np.tile(every, len(grid)),
            z=np.repeat(grid, len(every)),
            weights=weights.reshape(-1, weights.shape[2]),
            constants=constants,
        )

    return over_doppler(setting, build) if len(wave) else build({"dist": "fixed", "b": 1.0})


def _nearest(sightlines: Sequence[tuple[float, ArrayLike]], lines: Array) -> float:
    """Return the lowest redshift at which anything absorbs, a hair below it."""
    longest = max(LYMAN_LIMIT, *lines) if len(lines) else LYMAN_LIMIT
    shortest = min(float(_wavelengths(wavelengths).min()) for _, wavelengths in sightlines)
    z_max = max(z for z, _ in sightlines)
    return max(0.0, min(shortest / longest - 1.0, 0.9 * z_max) - 1e-6)


def _wavelengths(wavelengths: ArrayLike) -> Array:
    return np.atleast_1d(np.asarray(wavelengths, dtype=float))


def _continuum(
    z_em: float,
    wavelengths: Array,
    grid: Array,
    setting: Setting,
    panel_ends: Sequence[float],
) -> Array:
    """Return weights of τ_LC, shape (n_z, n_columns, n_wavelengths)."""
    found = []
    for wavelength in wavelengths:
        # Seen beyond the source's own limit, light is not absorbed: a path of no length.
        z_near = min(float(wavelength) / LYMAN_LIMIT - 1.0, z_em)
        _, weights = continuum_weights(
            z_near, z_em, grid, setting.distribution, setting.cosmology, panel_ends
        )
        found.append(weights)
    return np.stack(found, axis=2)


def _widths(
    lines: Sequence[LymanLine] | None,
    log_nhi: Array,
    setting: Setting,
    panel_ends: Sequence[float],
    doppler: Distribution,
) -> Array:
    """Return W_j / λ_j times the column weights, shape (n_lines, n_columns)."""
    kinks = (*setting.distribution.kinks, *panel_ends)
    d_nhi = column_nodes(*setting.column_range, kinks)[1]
    alone = LYMAN_SERIES if lines is None else lines
    rows = [mean_equivalent_width(log_nhi, doppler, line) / line.wavelength for line in alone]
    if lines is None:
        rows.extend(mean_blended_widths(log_nhi, doppler))
    return np.array(rows).reshape(len(rows), len(log_nhi)) * d_nhi


def _lines(
    z_em: float,
    wavelengths: Array,
    grid: Array,
    setting: Setting,
    lines: Array,
    widths: Array,
) -> Array:
    """Return weights of the lines' τ, shape (n_z, n_columns, n_wavelengths)."""
    weights = np.zeros((len(grid), widths.shape[1], len(wavelengths)))
    for line, width in zip(lines, widths, strict=True):
        z = wavelengths / line - 1.0
        here = np.flatnonzero((z >= 0.0) & (z < z_em))
        if not len(here):
            continue
        between = grid_interpolation(grid, setting.distribution.breaks, z[here])
        along = (1.0 + z[here]) * setting.cosmology.dx_dz(z[here])
        weights[:, :, here] += np.einsum("wz,w,n->znw", between, along, width, optimize=True)
    return weights
