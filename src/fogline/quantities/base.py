"""The protocol that every measured quantity obeys, and the response of one data set.

A prediction is made in two steps. The *response* gives raw predictions that are linear in f,

    raw = f(N_p, z_p) @ weights            (points p: quadrature nodes in log N and z),

and the quantity's `reduce` brings them to the rows of the file: ratios, roots, logarithms, and the
mean over a redshift bin of whatever was measured. All physics sits in points and weights.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property
from itertools import pairwise
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.distribution import ColumnDistribution
from fogline.doppler import DopplerGrid, doppler_grid
from fogline.quadrature import redshift_nodes
from fogline.quantities.spec import FileSpec
from fogline.settings import Distribution

Array = NDArray[np.float64]

LARGE_BLOCK = 40_000
"""Weights from which on zeros are worth being left out of the product."""

MOST_PARTS = 60


@dataclass(frozen=True)
class Setting:
    """What a response depends on beside the data: the model and the cosmology of the results.

    Parameters
    ----------
    distribution : ColumnDistribution
        Pivots and evolution pivots.
    cosmology : Cosmology
        Cosmology of f(N, X, z), in which results are quoted.
    doppler : mapping
        The config's ``doppler`` block.
    """

    distribution: ColumnDistribution
    cosmology: Cosmology
    doppler: Distribution

    @cached_property
    def doppler_grid(self) -> DopplerGrid | None:
        """The grid of a free Doppler argument; None where there is none."""
        return doppler_grid(self.doppler)

    @property
    def column_range(self) -> tuple[float, float]:
        """Lowest and highest column at which f is defined [dex of cm^-2]."""
        return self.distribution.column_range


@dataclass(frozen=True)
class Block:
    """The response of one data set.

    Parameters
    ----------
    log_nhi, z : ndarray, shape (n_points,)
        Where f is evaluated.
    weights : ndarray, shape (n_points, n_raw)
        ``raw = f @ weights``.
    constants : mapping of str to ndarray
        What `Quantity.reduce` needs beside the raw predictions.
    n_doppler : int
        Nodes of a free Doppler argument: weights then hold every raw prediction at each node, the
        node running fastest.
    """

    log_nhi: Array
    z: Array
    weights: Array
    constants: Mapping[str, Array] = field(default_factory=dict)
    n_doppler: int = 1

    @cached_property
    def segments(self) -> tuple[tuple[slice, slice], ...]:
        """Points, by redshift, and raw predictions of the parts of `weights` that are not zero.

        A single part where the matrix is small or full: one product is then the fastest.
        """
        whole = ((slice(0, self.weights.shape[0]), slice(0, self.weights.shape[1])),)
        if self.weights.size < LARGE_BLOCK:
            return whole
        ends = [0, *(np.flatnonzero(np.diff(self.z) != 0.0) + 1).tolist(), len(self.z)]
        parts = []
        for start, end in pairwise(ends):
            used = np.flatnonzero((self.weights[start:end] != 0.0).any(axis=0))
            columns = slice(int(used[0]), int(used[-1]) + 1) if len(used) else slice(0, 0)
            parts.append((slice(start, end), columns))
        area = sum((p.stop - p.start) * (r.stop - r.start) for p, r in parts)
        worth = area < 0.5 * self.weights.size and len(parts) <= MOST_PARTS
        return tuple(parts) if worth else whole


class Quantity(Protocol):
    """What the rest of fogline asks of a measured quantity."""

    spec: FileSpec
    """Columns and meta keys of its files."""

    label: str
    """Axis label, with unit."""

    def respond(self, data: DataSet, setting: Setting) -> Block:
        """Return the response of a data set."""
        ...

    def reduce(self, data: DataSet, raw: Array, constants: Mapping[str, Array]) -> Array:
        """Bring raw predictions, shape (..., n_raw), to the rows of the file, (..., n_rows)."""
        ...


@dataclass(frozen=True)
class Term:
    """One raw prediction: an integral over columns at one redshift.

    Parameters
    ----------
    z : float
        Redshift.
    log_nhi : ndarray, shape (n_nodes,) [dex of cm^-2]
    weights : ndarray, shape (n_nodes,)
        Kernel times quadrature weight.
    """

    z: float
    log_nhi: Array
    weights: Array


def assemble(terms: Iterable[tuple[int, Term]], n_raw: int, **constants: Array) -> Block:
    """Put terms side by side into one block.

    Parameters
    ----------
    terms : iterable of (int, Term)
        Index of the raw prediction to which the term adds, and the term.
    n_raw : int
        Number of raw predictions.
    **constants : ndarray
        Constants of the block.

    Returns
    -------
    Block
    """
    terms = list(terms)
    sizes = [len(term.log_nhi) for _, term in terms]
    weights = np.zeros((sum(sizes), n_raw))
    for start, (index, term) in zip(np.cumsum([0, *sizes[:-1]]), terms, strict=True):
        weights[start : start + len(term.log_nhi), index] = term.weights
    return Block(
        log_nhi=np.concatenate([term.log_nhi for _, term in terms]),
        z=np.repeat([term.z for _, term in terms], sizes),
        weights=weights,
        constants=constants,
    )


def over_doppler(setting: Setting, build: Callable[[Distribution], Block]) -> Block:
    """Return a block whose kernel has absorption lines in it.

    Parameters
    ----------
    setting : Setting
    build : callable
        Makes the block for one ``doppler`` block of the config (it must use this argument, not
        ``setting.doppler``).
    """
    grid = setting.doppler_grid
    if grid is None:
        return build(setting.doppler)
    blocks = [build(settings) for settings in grid.settings]
    weights = np.stack([block.weights for block in blocks], axis=2)
    return replace(blocks[0], weights=weights.reshape(len(weights), -1), n_doppler=len(blocks))


def row_redshifts(data: DataSet, setting: Setting) -> list[tuple[int, float, float]]:
    """Return (row, z, weight) of every redshift node of every row.

    The weights are those of the data's own absorption distance, and add up to 1 for each row.
    """
    cosmology = data.cosmology or setting.cosmology
    breaks = setting.distribution.breaks
    return [
        (row, float(z), float(weight))
        for row, (lo, hi) in enumerate(zip(data.z_lo, data.z_hi, strict=True))
        for z, weight in zip(*redshift_nodes(lo, hi, cosmology, breaks), strict=True)
    ]


def bin_mean(nodes: list[tuple[int, float, float]], n_rows: int) -> Array:
    """Return the matrix, shape (n_nodes, n_rows), of the mean over each row's redshift nodes."""
    matrix = np.zeros((len(nodes), n_rows))
    for index, (row, _, weight) in enumerate(nodes):
        matrix[index, row] = weight
    return matrix


def path_ratio(data: DataSet, setting: Setting, z: float) -> float:
    """Return f in the data's convention over f in the results' convention.

    Surveys count absorbers per dz. Where a file speaks of dX, its dX/dz is that of its own
    cosmology; where it speaks of dz, the ratio is the dX/dz of the results.
    """
    ours = float(setting.cosmology.dx_dz(z))
    if data.meta.get("per") == "dz":
        return ours
    return ours / float((data.cosmology or setting.cosmology).dx_dz(z))
