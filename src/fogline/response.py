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

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fogline.datasets import DataSet
from fogline.distribution import ColumnDistribution
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
    """

    distribution: ColumnDistribution
    datasets: tuple[DataSet, ...]
    blocks: tuple[Block, ...]

    @cached_property
    def bases(self) -> tuple[Array, ...]:
        """Matrix from expanded parameters to ln f of each block, shape (n_expanded, n_points)."""
        return tuple(
            np.ascontiguousarray(self.distribution.basis(block.log_nhi, block.z))
            for block in self.blocks
        )

    @cached_property
    def slices(self) -> tuple[slice, ...]:
        """Rows of each data set in the predictions."""
        return _slices([data.n_rows for data in self.datasets])

    def predict(self, theta: ArrayLike) -> Array:
        """Return the prediction of every row in its data set's own convention.

        Parameters
        ----------
        theta : array_like, shape (n, n_parameters) or (n_parameters,)

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
        expanded = self.distribution.expand(theta)
        parts = []
        # Block by block, so that f stays in cache between its exponential and its weights.
        for data, block, basis in zip(self.datasets, self.blocks, self.bases, strict=True):
            raw = _raw(expanded, basis, block.weights)
            parts.append(QUANTITIES[data.quantity].reduce(data, raw, block.constants))
        return np.concatenate(parts, axis=-1)


def raw_predictions(distribution: ColumnDistribution, block: Block, theta: Array) -> Array:
    """Return the raw predictions of one block: integrals of f, before any `reduce`.

    Parameters
    ----------
    distribution : ColumnDistribution
    block : Block
    theta : ndarray, shape (n, n_parameters)

    Returns
    -------
    ndarray, shape (n, n_raw)
    """
    basis = distribution.basis(block.log_nhi, block.z)
    chunks = [theta[i : i + CHUNK] for i in range(0, len(theta), CHUNK)]
    return np.concatenate([_raw(distribution.expand(t), basis, block.weights) for t in chunks])


def _raw(expanded: Array, basis: Array, weights: Array) -> Array:
    f = expanded @ basis
    np.exp(f, out=f)
    return np.asarray(f @ weights)


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
    return Response(setting.distribution, tuple(datasets), tuple(blocks))


def _slices(sizes: Sequence[int]) -> tuple[slice, ...]:
    ends = np.cumsum(sizes)
    return tuple(slice(int(end - n), int(end)) for end, n in zip(ends, sizes, strict=True))
