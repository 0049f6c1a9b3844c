"""The response: all physics as weights on fixed nodes, so that predictions are matrix products.

For n parameter vectors at once::

    ln f = expand(θ) @ basis        (one product, then one exponential)
    raw  = f[:, block] @ weights    (one product a data set)

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

MAX_CHUNK_BYTES = 1 << 26


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
    def basis(self) -> Array:
        """Matrix from expanded parameters to ln f, shape (n_expanded, n_points)."""
        return np.ascontiguousarray(
            self.distribution.basis(
                np.concatenate([block.log_nhi for block in self.blocks]),
                np.concatenate([block.z for block in self.blocks]),
            )
        )

    @cached_property
    def slices(self) -> tuple[slice, ...]:
        """Rows of each data set in the predictions."""
        return _slices([data.n_rows for data in self.datasets])

    @cached_property
    def _points(self) -> tuple[slice, ...]:
        return _slices([len(block.log_nhi) for block in self.blocks])

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
        # Chunks keep f in cache and bound the memory when thousands of draws come at once.
        size = max(1, MAX_CHUNK_BYTES // (8 * self.basis.shape[1]))
        chunks = [self._predict(flat[i : i + size]) for i in range(0, len(flat), size)]
        return np.concatenate(chunks).reshape(*theta.shape[:-1], -1)

    def _predict(self, theta: Array) -> Array:
        f = self.distribution.expand(theta) @ self.basis
        np.exp(f, out=f)
        parts = [
            QUANTITIES[data.quantity].reduce(data, f[:, points] @ block.weights, block.constants)
            for data, block, points in zip(self.datasets, self.blocks, self._points, strict=True)
        ]
        return np.concatenate(parts, axis=-1)


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
