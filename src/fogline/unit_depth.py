"""Where the Lyman-continuum optical depth reaches one.

A photon seen at 912 Å at z_912 had, at an absorber at z' > z_912, ν/ν_912 = (1+z')/(1+z_912)::

    τ(z_912; z_em) = ∫_{z_912}^{z_em} dz' (dX/dz') ∫ f(N,z') {1 − exp[−N σ(ν)]} dN

With s = ln[(1+z_em)/(1+z_912)], q(s) = τ/s is smooth and finite at s = 0. Its Chebyshev
coefficients on 0 < s < ln(1+z_em) are linear in f: they are the raw predictions. From a table of q
the first crossing of s q(s) = 1 is solved for all walkers and sources at once; the *first*, since
τ need not be monotone in s (the cross-section falls along the path). Where there is none above
redshift 0 the answer is infinite: beyond reach.

Where the exponents of f change at a break in redshift, τ has a kink in its curvature there: the
path is cut at breaks, and each segment has coefficients and a table of its own (of τ itself in all
but the first, where 1/s would spoil the convergence).

f between its redshift nodes is interpolated in ln(1+z) (Chebyshev, `Z_NODES` nodes from 0 to the
highest source). Accuracy against adaptive quadrature: ``tests/properties/test_accuracy.py``.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import ArrayLike, NDArray

from fogline.atomic import photoionization_cross_section
from fogline.cosmology import Cosmology
from fogline.distribution import ColumnDistribution
from fogline.quadrature import column_nodes, interval_nodes

Array = NDArray[np.float64]

Z_NODES = 14
"""Nodes of f in ln(1+z), at most; fewer where the range is short:"""

LEAST_Z_NODES = 6
Z_NODES_PER_LN = 4.7
COEFFICIENTS = 12
PATH_NODES = 14
NEWTON_STEPS = 3

# q is tabulated evenly in v = √(s / s_max), dense near s = 0 where free paths of high-redshift
# sources end; the cubic through four neighbours is then good to 6e-6 for any draw from
# a broad prior, and to 3e-7 for most.
_TABLE_SIZE = 48
_TABLE_STEP = np.arange(_TABLE_SIZE + 1) / _TABLE_SIZE
_TABLE_BASIS = chebyshev.chebvander(2.0 * _TABLE_STEP**2 - 1.0, COEFFICIENTS - 1).T


def chebyshev_points(lo: float, hi: float, n_points: int) -> Array:
    """Return Chebyshev points of the first kind on an interval, shape (n_points,)."""
    return 0.5 * (lo + hi) + 0.5 * (hi - lo) * chebyshev.chebpts1(n_points)


def interpolation_matrix(nodes: Array, points: Array) -> Array:
    """Return M for which ``g(points) = M @ g(nodes)``, shape (n_points, n_nodes).

    Parameters
    ----------
    nodes : ndarray, shape (n_nodes,)
        Distinct; Chebyshev points keep the matrix small in norm.
    points : ndarray, shape (n_points,)
    """
    span = nodes.max() - nodes.min()
    to_unit = lambda x: 2.0 * (x - nodes.min()) / span - 1.0  # noqa: E731
    degree = len(nodes) - 1
    vandermonde = chebyshev.chebvander(to_unit(nodes), degree)
    return np.asarray(chebyshev.chebvander(to_unit(points), degree) @ np.linalg.inv(vandermonde))


def redshift_grid(z_max: float, breaks: Sequence[float] = (), z_min: float = 0.0) -> Array:
    """Return redshifts on which f is tabulated.

    Parameters
    ----------
    z_max : float
    breaks : sequence of float, optional
        Redshifts at which f has kinks: each segment has nodes of its own, from end to end.
    z_min : float, optional

    Returns
    -------
    ndarray, shape (n_nodes,)
    """
    edges = np.log1p([z_min, *_inside(breaks, z_min, z_max), z_max])
    return np.concatenate([np.expm1(_segment_nodes(lo, hi)) for lo, hi in pairwise(edges)])


def _segment_nodes(lo: float, hi: float) -> Array:
    n_nodes = min(Z_NODES, LEAST_Z_NODES + math.ceil(Z_NODES_PER_LN * (hi - lo)))
    # First-kind points do not reach the ends; stretched so that they do, no point extrapolates.
    points = chebyshev.chebpts1(n_nodes)
    nodes = lo + 0.5 * (hi - lo) * (1.0 + points / points.max())
    nodes[0], nodes[-1] = lo, hi
    return np.asarray(nodes)


def grid_interpolation(grid: Array, breaks: Sequence[float], z: Array) -> Array:
    """Return M for which ``g(z) = M @ g(grid)``, shape (n_points, n_grid), g smooth but at breaks.

    Parameters
    ----------
    grid : ndarray, shape (n_grid,)
        From `redshift_grid` with the same breaks.
    breaks : sequence of float
    z : ndarray, shape (n_points,)
        Between the first and the last redshift of the grid.
    """
    matrix = np.zeros((len(z), len(grid)))
    segment = np.searchsorted(_inside(breaks, float(grid[0]), float(grid[-1])), z, side="right")
    # Where one segment ends and the next begins a redshift stands twice.
    starts = [0, *(np.flatnonzero(np.diff(grid) == 0.0) + 1), len(grid)]
    for i, (start, end) in enumerate(pairwise(starts)):
        here = np.flatnonzero(segment == i)
        nodes = np.log1p(grid[start:end])
        matrix[here, start:end] = interpolation_matrix(nodes, np.log1p(z[here]))
    return matrix


def path_nodes(z_near: float, z_far: float, breaks: Sequence[float]) -> tuple[Array, Array]:
    """Return redshift nodes and weights of integrals over dz along a path; panels end at breaks.

    Parameters
    ----------
    z_near, z_far : float
    breaks : sequence of float

    Returns
    -------
    z, weights : ndarray, shape (n_nodes,)
    """
    edges = np.log1p([z_near, *_inside(breaks, z_near, z_far), z_far])
    panels = [interval_nodes(lo, hi, PATH_NODES) for lo, hi in pairwise(edges)]
    path, d_path = (np.concatenate(part) for part in zip(*panels, strict=True))
    # dz = (1 + z) d ln(1 + z).
    return np.expm1(path), d_path * np.exp(path)


def _inside(breaks: Sequence[float], lo: float, hi: float) -> list[float]:
    return [b for b in breaks if lo < b < hi]


def continuum_weights(
    z_near: float,
    z_far: float,
    grid: Array,
    distribution: ColumnDistribution,
    cosmology: Cosmology,
    panel_ends: Sequence[float] = (),
) -> tuple[Array, Array]:
    """Return the weights of τ_LC between two redshifts on the nodes (z grid × log N).

    Parameters
    ----------
    z_near, z_far : float
        z_912 and z_em. z_912 below zero is light that is seen at wavelengths shorter than the
        limit's; it is absorbed from redshift 0 on.
    grid : ndarray, shape (n_z,)
        Redshifts at which f is tabulated: `redshift_grid` with the distribution's breaks.
    distribution : ColumnDistribution
    cosmology : Cosmology
        Cosmology of f(N, X).
    panel_ends : sequence of float, optional [dex of cm^-2]
        Further columns at which quadrature panels end.

    Returns
    -------
    log_nhi : ndarray, shape (n_columns,) [dex of cm^-2]
    weights : ndarray, shape (n_z, n_columns)
    """
    log_nhi, d_nhi = column_nodes(*distribution.column_range, (*distribution.kinks, *panel_ends))
    z, dz = path_nodes(max(z_near, 0.0), z_far, distribution.breaks)
    ratio = (1.0 + z) / (1.0 + z_near)
    depth = 10.0**log_nhi * photoionization_cross_section(ratio)[:, None]
    absorbed = -np.expm1(-depth) * d_nhi
    along = dz * cosmology.dx_dz(z)
    interpolate = grid_interpolation(grid, distribution.breaks, z)
    return log_nhi, np.einsum("p,pz,pn->zn", along, interpolate, absorbed, optimize=True)


def depth_coefficients(
    z_em: float,
    grid: Array,
    distribution: ColumnDistribution,
    cosmology: Cosmology,
    n_segments: int = 1,
) -> tuple[Array, Array]:
    """Return the weights that give the Chebyshev coefficients of τ/s, in later segments of τ.

    Parameters
    ----------
    z_em : float
    grid, distribution, cosmology
        As in `continuum_weights`.
    n_segments : int
        Segments of the path, cut at breaks of the distribution; those that this source has not are
        given zero weights.

    Returns
    -------
    log_nhi : ndarray, shape (n_columns,) [dex of cm^-2]
    weights : ndarray, shape (n_segments * COEFFICIENTS, n_z, n_columns)
    """
    edges = segment_edges(z_em, distribution.breaks, n_segments)
    to_coefficients = np.linalg.inv(
        chebyshev.chebvander(chebyshev.chebpts1(COEFFICIENTS), COEFFICIENTS - 1)
    )
    log_nhi, _ = column_nodes(*distribution.column_range, distribution.kinks)
    weights = np.zeros((n_segments, COEFFICIENTS, len(grid), len(log_nhi)))
    for i, (near, far) in enumerate(pairwise(np.log1p(z_em) * edges**2)):
        if near == far:
            continue
        rows = []
        for step in chebyshev_points(near, far, COEFFICIENTS):
            z_near = float(np.expm1(np.log1p(z_em) - step))
            row = continuum_weights(z_near, z_em, grid, distribution, cosmology)[1]
            rows.append(row if i else row / step)
        weights[i] = np.tensordot(to_coefficients, np.array(rows), axes=1)
    return log_nhi, weights.reshape(-1, len(grid), len(log_nhi))


def segment_edges(z_em: float, breaks: Sequence[float], n_segments: int) -> Array:
    """Return where a source's path is cut, as v = √(s / s_max), shape (n_segments + 1,).

    Parameters
    ----------
    z_em : float
    breaks : sequence of float
        Redshifts; those beyond the source cut nothing, and segments that are left over are empty.
    n_segments : int
    """
    inner = sorted(np.log((1.0 + z_em) / (1.0 + b)) for b in _inside(breaks, 0.0, z_em))
    edges = np.ones(n_segments + 1)
    edges[: len(inner) + 1] = np.sqrt([0.0, *inner] / np.log1p(z_em))
    return edges


def table_basis(z_em: Array, edges: Array) -> Array:
    """Return what turns Chebyshev coefficients into tables of q = τ/s, one a segment.

    Parameters
    ----------
    z_em : ndarray, shape (n_sources,)
    edges : ndarray, shape (n_sources, n_segments + 1)
        From `segment_edges`.

    Returns
    -------
    ndarray, shape (n_sources, n_segments, COEFFICIENTS, _TABLE_SIZE + 1)
    """
    lo, hi = edges[..., :-1, None], edges[..., 1:, None]
    v = lo + (hi - lo) * _TABLE_STEP
    span = np.where(hi > lo, hi**2 - lo**2, 1.0)
    x = 2.0 * (v**2 - lo**2) / span - 1.0
    basis = np.asarray(chebyshev.chebvander(x, COEFFICIENTS - 1), dtype=float)
    s = np.log1p(z_em)[:, None, None] * v**2
    basis[:, 1:] /= s[:, 1:, :, None]
    return np.moveaxis(basis, -1, -2)


def solve_unit_depth(
    coefficients: Array, z_em: ArrayLike, edges: Array | None = None, basis: Array | None = None
) -> Array:
    """Return s at the first τ(s) = 1, infinite where τ stays below one down to redshift 0.

    Parameters
    ----------
    coefficients : ndarray, shape (..., n_sources, n_segments * COEFFICIENTS)
        Chebyshev coefficients of τ/s on 0 < s < ln(1+z_em), or on each segment of it.
    z_em : array_like, shape (n_sources,)
    edges, basis : ndarray, optional
        `segment_edges` and `table_basis` of all sources; a single segment by default.

    Returns
    -------
    ndarray, shape (..., n_sources)
        ln[(1+z_em)/(1+z_912)].
    """
    s_max = np.log1p(np.asarray(z_em, dtype=float))
    if edges is None or basis is None:
        flat = coefficients.reshape(-1, COEFFICIENTS) @ _TABLE_BASIS
        q = flat.reshape(*coefficients.shape[:-1], _TABLE_SIZE + 1)
        return _solve_segment(q, s_max, np.zeros_like(s_max), np.ones_like(s_max))
    by_segment = coefficients.reshape(*coefficients.shape[:-1], -1, COEFFICIENTS)
    first = np.full(coefficients.shape[:-1], np.inf)
    for i in range(edges.shape[-1] - 1):
        q = np.einsum("...sc,sct->...st", by_segment[..., i, :], basis[:, i])
        found = _solve_segment(q, s_max, edges[:, i], edges[:, i + 1])
        # A later segment may begin above one: only the first that reaches it counts.
        first = np.where(np.isinf(first), found, first)
    return first


def _solve_segment(q: Array, s_max: Array, v_lo: Array, v_hi: Array) -> Array:
    """Return s at the first τ(s) = 1 within a segment, infinite where there is none.

    Parameters
    ----------
    q : ndarray, shape (..., n_sources, _TABLE_SIZE + 1)
        τ/s evenly in v = √(s / s_max) over the segment.
    s_max, v_lo, v_hi : ndarray, shape (n_sources,)
    """
    # An empty segment reaches nothing, and must not divide by its width either.
    step_v = np.where(v_hi > v_lo, v_hi - v_lo, 1.0) / _TABLE_SIZE
    v_table = v_lo[:, None] + (v_hi - v_lo)[:, None] * _TABLE_STEP
    with np.errstate(divide="ignore"):
        enough = 1.0 / (s_max[:, None] * v_table**2)
    reached = q >= enough
    first = np.argmax(reached, axis=-1)
    start = np.clip(first - 2, 0, _TABLE_SIZE - 3)
    cubic = _cubic(q, start)
    # In the form v √(s_max q) = 1, nearly linear in v, down to the shortest paths.
    last = (first - start).astype(float)
    t = last
    for _ in range(NEWTON_STEPS):
        value, slope = _evaluate(cubic, t)
        value = np.maximum(value, np.finfo(float).tiny)
        v = v_lo + step_v * (start + t)
        root = np.sqrt(s_max * value)
        step = (v * root - 1.0) / (root * (step_v + 0.5 * v * slope / value))
        t = np.clip(t - step, last - 1.0, last)
    s = s_max * (v_lo + step_v * (start + t)) ** 2
    return np.where(reached.any(axis=-1), s, np.inf)


def length_table(z_em: float, cosmology: Cosmology, comoving: bool) -> Array:
    """Return length/s of one source at the tabulated s, shape (_TABLE_SIZE + 1,) [Mpc].

    Parameters
    ----------
    z_em : float
    cosmology : Cosmology
        The data's cosmology.
    comoving : bool
        Comoving instead of proper length.
    """
    length = cosmology.comoving_length if comoving else cosmology.proper_length
    # At s = 0 the limit of length/s, taken as that of a step too short to matter.
    s = np.log1p(z_em) * np.maximum(_TABLE_STEP**2, 1e-9)
    return np.asarray(length((1.0 + z_em) * np.exp(-s) - 1.0, z_em) / s)


def path_length(s: Array, z_em: ArrayLike, table: Array) -> Array:
    """Return the length [Mpc] that belongs to s, infinite where s is.

    Parameters
    ----------
    s : ndarray, shape (..., n_sources)
    z_em : array_like, shape (n_sources,)
    table : ndarray, shape (n_sources, _TABLE_SIZE + 1) [Mpc]
        From `length_table`.
    """
    reached = np.isfinite(s)
    finite = np.where(reached, s, 0.0)
    v = np.sqrt(finite / np.log1p(np.asarray(z_em, dtype=float))) * _TABLE_SIZE
    start = np.clip(v.astype(np.int64) - 1, 0, _TABLE_SIZE - 3)
    cubic = _cubic(np.broadcast_to(table, (*s.shape, table.shape[-1])), start)
    return np.where(reached, finite * _evaluate(cubic, v - start)[0], np.inf)


def _cubic(table: Array, start: NDArray[np.int64]) -> tuple[Array, Array, Array, Array]:
    """Return the Newton coefficients of the cubic through four neighbours, from `start` on."""
    y0, y1, y2, y3 = np.moveaxis(
        np.take_along_axis(table, start[..., None] + np.arange(4), axis=-1), -1, 0
    )
    return y0, y1 - y0, 0.5 * (y2 - 2.0 * y1 + y0), (y3 - 3.0 * (y2 - y1) - y0) / 6.0


def _evaluate(cubic: tuple[Array, Array, Array, Array], t: Array) -> tuple[Array, Array]:
    """Return value and slope of a cubic at t table steps from its first point."""
    c0, c1, c2, c3 = cubic
    value = c0 + t * (c1 + (t - 1.0) * (c2 + (t - 2.0) * c3))
    slope = c1 + (2.0 * t - 1.0) * c2 + (3.0 * t * t - 6.0 * t + 2.0) * c3
    return value, slope
