"""The response: all physics as weights on fixed nodes, so that predictions are matrix products.

For n parameter vectors at once::

    ln f = expand(θ) @ basis        (a product, then an exponential)
    raw  = f @ weights              (both for each data set)

and each quantity brings its raw predictions to the rows of its file. Every data set has nodes of
its own: exact redshifts, panels that end at its own column limits. Compared with one shared grid in
(log N × z) this needs no interpolation in z for local quantities and about half the arithmetic.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fogline.datasets import DataSet
from fogline.distribution import ColumnDistribution, Points
from fogline.doppler import DopplerGrid
from fogline.quantities import QUANTITIES, Block, Setting

Array = NDArray[np.float64]

CHUNK = 256
"""Parameter vectors evaluated at once: bounds the memory when thousands of draws come."""


@dataclass(frozen=True)
class Response:
    """Predictions of many data sets for many parameter vectors.

    Parameters
    ----------
    distribution : ColumnDistribution
        Where f has its parameters.
    datasets : tuple of DataSet
        What is predicted.
    blocks : tuple of Block
        One per data set.
    doppler : DopplerGrid, optional
        Of a free Doppler argument, a parameter that follows those of f.
    """

    distribution: ColumnDistribution
    datasets: tuple[DataSet, ...]
    blocks: tuple[Block, ...]
    doppler: DopplerGrid | None = None

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the parameters that predictions depend on: f's, and a free Doppler argument."""
        return self.distribution.names + ((self.doppler.name,) if self.doppler else ())

    @property
    def n_parameters(self) -> int:
        """Number of parameters that predictions depend on; any that follow are not read."""
        return self.distribution.n_parameters + (self.doppler is not None)

    @cached_property
    def points(self) -> tuple[Points, ...]:
        """The points of each block, prepared."""
        return tuple(self.distribution.points(block.log_nhi, block.z) for block in self.blocks)

    def mix(self, theta: Array) -> Array | None:
        """Return the weights of the nodes of a free Doppler argument, shape (n, n_nodes)."""
        return doppler_mix(self.distribution, self.doppler, theta)

    @cached_property
    def slices(self) -> tuple[slice, ...]:
        """Rows of each data set in the predictions."""
        return _slices([data.n_rows for data in self.datasets])

    def predict(self, theta: ArrayLike) -> Array:
        """Return the prediction of every row in its data set's own convention.

        Parameters
        ----------
        theta : array_like, shape (n, n_parameters or more) or (n_parameters or more,)

        Returns
        -------
        ndarray, shape (n, n_rows) or (n_rows,)
            May hold infinities (a free path beyond reach), never NaN for finite `theta`.
        """
        theta = np.asarray(theta, dtype=float)
        flat = np.atleast_2d(theta)
        chunks = [self._predict(flat[i : i + CHUNK]) for i in range(0, len(flat), CHUNK)]
        return np.concatenate(chunks).reshape(*theta.shape[:-1], -1)

    def _predict(self, theta: Array) -> Array:
        expanded, mix = self.distribution.expand(theta), self.mix(theta)
        parts = []
        # Block by block, so that f stays in cache between its exponential and its weights.
        for data, block, points in zip(self.datasets, self.blocks, self.points, strict=True):
            raw = mixed(_raw(self.distribution, expanded, points, block), block, mix)
            parts.append(QUANTITIES[data.quantity].reduce(data, raw, block.constants))
        return np.concatenate(parts, axis=-1)


def raw_predictions(setting: Setting, block: Block, theta: Array) -> Array:
    """Return the raw predictions of one block: integrals of f, before any `reduce`.

    Parameters
    ----------
    setting : Setting
    block : Block
    theta : ndarray, shape (n, n_parameters or more)

    Returns
    -------
    ndarray, shape (n, n_raw)
    """
    distribution = setting.distribution
    points = distribution.points(block.log_nhi, block.z)
    chunks = [theta[i : i + CHUNK] for i in range(0, len(theta), CHUNK)]
    raw = [_raw(distribution, distribution.expand(t), points, block) for t in chunks]
    mix = doppler_mix(distribution, setting.doppler_grid, theta)
    return mixed(np.concatenate(raw), block, mix)


def _raw(distribution: ColumnDistribution, expanded: Array, points: Points, block: Block) -> Any:
    f = distribution.ln_f(expanded, points)
    np.exp(f, out=f)
    return segmented(f, block.weights, block.segments)


def segmented(f: Any, weights: Any, segments: tuple[tuple[slice, slice], ...]) -> Any:
    """Return ``f @ weights`` from the parts of the weights that are not zero.

    Parameters
    ----------
    f : ndarray, shape (n, n_points)
    weights : ndarray, shape (n_points, n_raw)
    segments : tuple of (slice, slice)
        From `Block.segments`.
    """
    if len(segments) == 1:
        return f @ weights
    raw = np.zeros((len(f), weights.shape[1]), dtype=f.dtype)
    for points, columns in segments:
        raw[:, columns] += f[:, points] @ weights[points, columns]
    return raw


def doppler_mix(
    distribution: ColumnDistribution, doppler: DopplerGrid | None, theta: Array
) -> Array | None:
    """Return the weights of the nodes of a free Doppler argument, shape (n, n_nodes), or None."""
    return None if doppler is None else doppler.mix(theta[:, distribution.n_parameters])


def mixed(raw: Array, block: Block, mix: Array | None) -> Array:
    """Interpolate raw predictions between the nodes of a free Doppler argument.

    Parameters
    ----------
    raw : ndarray, shape (n, n_raw * n_doppler)
    block : Block
    mix : ndarray, shape (n, n_doppler), or None

    Returns
    -------
    ndarray, shape (n, n_raw)
    """
    if block.n_doppler == 1:
        return raw
    assert mix is not None
    return np.asarray(np.einsum("nrk,nk->nr", raw.reshape(len(raw), -1, block.n_doppler), mix))


def build_response(datasets: Sequence[DataSet], setting: Setting) -> Response:
    """Return the response of data sets under a model and a cosmology of the results.

    Parameters
    ----------
    datasets : sequence of DataSet
    setting : Setting

    Returns
    -------
    Response
    """
    blocks = [QUANTITIES[data.quantity].respond(data, setting) for data in datasets]
    return Response(setting.distribution, tuple(datasets), tuple(blocks), setting.doppler_grid)


def _slices(sizes: Sequence[int]) -> tuple[slice, ...]:
    ends = np.cumsum(sizes)
    return tuple(slice(int(end - n), int(end)) for end, n in zip(ends, sizes, strict=True))
