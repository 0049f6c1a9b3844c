"""Predictions for all walkers, in single precision about a reference curve.

Sampling evaluates f at thousands of nodes for every walker and step; in single precision products
and exponentials take half the time. Rounding is kept harmless by working with ratios: with a fixed
reference θ_0, ln(f/f_0) is a few units where ln f is −60, and f_0 goes into the weights in double
precision, as does a scale of every raw prediction::

    raw = scale · [exp{(expand(θ) − expand(θ_0)) @ basis} @ (f_0 · weights / scale)]

Predictions agree with those of `fogline.response.Response` to 1e-5 over draws from the prior and to
2e-6 near a posterior (``tests/unit/test_walkers.py``); everything that users read
(predictions, derived tables, replicates) is computed in double precision.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from fogline.quantities import QUANTITIES
from fogline.response import Response

Array = NDArray[np.float64]
Single = NDArray[np.float32]

LARGEST_LN_RATIO = 80.0
"""ln(f/f_0) above which single precision overflows (at 88.7)."""


@dataclass(frozen=True)
class WalkerResponse:
    """The response of an analysis, made for the hot loop.

    Parameters
    ----------
    response : Response
        In double precision.
    reference : ndarray, shape (n_parameters,)
        θ_0, such as the median of the prior.
    """

    response: Response
    reference: Array

    @cached_property
    def _expanded(self) -> Array:
        return self.response.distribution.expand(self.reference)

    @cached_property
    def _blocks(self) -> list[tuple[Single, Single, Array]]:
        """Basis, weights and scale of every block."""
        blocks = []
        for block, basis in zip(self.response.blocks, self.response.bases, strict=True):
            weights = np.exp(self._expanded @ basis)[:, None] * block.weights
            scale = np.abs(weights).max(axis=0)
            blocks.append((basis.astype(np.float32), (weights / scale).astype(np.float32), scale))
        return blocks

    @cached_property
    def _reach(self) -> tuple[float, float]:
        """Bounds of |d ln f| per unit change of log f at a pivot, and of an exponent."""
        distribution = self.response.distribution
        n_exponents = len(distribution.evolution_pivots)
        stretch = max(np.abs(basis[-n_exponents:]).max() for basis in self.response.bases)
        return float(np.log(10.0)), float(stretch)

    def in_range(self, theta: Array) -> NDArray[np.bool_]:
        """Return which parameter vectors single precision can hold.

        Parameters
        ----------
        theta : ndarray, shape (n, n_parameters)

        Returns
        -------
        ndarray of bool, shape (n,)
        """
        per_pivot, per_exponent = self._reach
        n_pivots = len(self.response.distribution.pivots)
        away = np.abs(theta - self.reference)
        # The spline is monotone between pivots: it departs no further than its pivots do, plus
        # what the reference itself falls within an interval.
        ln_ratio = per_pivot * (away[:, :n_pivots].max(axis=1) + self._fall)
        ln_ratio += per_exponent * away[:, n_pivots:].max(axis=1, initial=0.0)
        return np.asarray(ln_ratio < LARGEST_LN_RATIO)

    @cached_property
    def _fall(self) -> float:
        n_pivots = len(self.response.distribution.pivots)
        return float(np.abs(np.diff(self.reference[:n_pivots])).max())

    def predict(self, theta: Array) -> Array:
        """Return the prediction of every row in its data set's own convention.

        Parameters
        ----------
        theta : ndarray, shape (n, n_parameters)
            All `in_range`.

        Returns
        -------
        ndarray, shape (n, n_rows)
        """
        shift = self.response.distribution.expand(theta) - self._expanded
        single = shift.astype(np.float32)
        parts = []
        # Block by block, so that f stays in cache between its exponential and its weights.
        for data, block, (basis, weights, scale) in zip(
            self.response.datasets, self.response.blocks, self._blocks, strict=True
        ):
            ratio = single @ basis
            np.exp(ratio, out=ratio)
            raw = (ratio @ weights) * scale
            parts.append(QUANTITIES[data.quantity].reduce(data, raw, block.constants))
        return np.concatenate(parts, axis=-1)
