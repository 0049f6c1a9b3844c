"""Predictions for all walkers, in single precision about a reference curve.

Sampling evaluates f at thousands of nodes for every walker and step; in single precision products
and exponentials take half the time. Rounding is kept harmless by working with ratios: with a fixed
reference θ_0, ln(f/f_0) is a few units where ln f is −60, and f_0 goes into the weights in double
precision, as does a scale of every raw prediction::

    raw = scale · [exp{(expand(θ) − expand(θ_0)) @ basis} @ (f_0 · weights / scale)]

with what a form of high columns adds in the exponent.

Predictions agree with those of `fogline.response.Response` to 1e-5 over draws from the prior and to
2e-6 near a posterior (``tests/unit/test_walkers.py``); everything that users read
(predictions, derived tables, replicates) is computed in double precision.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from fogline.distribution import LN10
from fogline.quantities import QUANTITIES
from fogline.response import Response, mixed, segmented

Array = NDArray[np.float64]
Single = NDArray[np.float32]

LARGEST_LN_RATIO = 80.0
"""ln(f/f_0) above which single precision overflows (at 88.7)."""

NEGLIGIBLE = 1e-25
"""Weights over the largest of their prediction that are nothing."""

LEAST_LN_RATIO = -200.0
"""ln(f/f_0) of a form of high columns below which nothing is left, however far it falls."""


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
        for block, points in zip(self.response.blocks, self.response.points, strict=True):
            ln_f = self.response.distribution.ln_f(self._expanded[None], points)[0]
            weights = np.exp(ln_f)[:, None] * block.weights
            scale = np.abs(weights).max(axis=0)
            scale[scale == 0.0] = 1.0  # nothing absorbs there
            weights /= scale
            # Numbers too small for single precision would slow every product down.
            weights[np.abs(weights) < NEGLIGIBLE] = 0.0
            single = points.basis.astype(np.float32), weights.astype(np.float32)
            blocks.append((*single, scale))
        return blocks

    def _shape(self, expanded: Array, block: int) -> Single:
        """Return what the form of high columns adds to ln(f/f_0) at the columns of a block."""
        distribution = self.response.distribution
        form, n_shape = distribution.high_form, distribution.shape[2]
        assert form is not None
        now, then = expanded[:, -n_shape:], self._expanded[None, -n_shape:]
        columns, join = self.response.points[block].log_nhi, distribution.pivots[-1]
        shift = form.ln_shape(now, columns, join) - form.ln_shape(then, columns, join)
        return np.maximum(shift, LEAST_LN_RATIO).astype(np.float32)

    @cached_property
    def _stretch(self) -> float:
        """Bound of |d ln f| per unit change of all exponents together."""
        n_pivots, n_exponents, _ = self.response.distribution.shape
        exponents = slice(2 * n_pivots, 2 * n_pivots + n_exponents)
        sums = [np.abs(p.basis[exponents]).sum(axis=0).max() for p in self.response.points]
        return float(max(sums))

    def in_range(self, theta: Array) -> NDArray[np.bool_]:
        """Return which parameter vectors single precision can hold.

        Parameters
        ----------
        theta : ndarray, shape (n, n_parameters)

        Returns
        -------
        ndarray of bool, shape (n,)
        """
        distribution = self.response.distribution
        n_pivots, n_exponents, _ = distribution.shape
        away = np.abs(theta[:, : n_pivots + n_exponents] - self.reference[: n_pivots + n_exponents])
        # The spline is monotone between pivots: it departs no further than its pivots do, plus
        # what the reference itself falls within an interval.
        ln_ratio = LN10 * (away[:, :n_pivots].max(axis=1) + self._fall)
        ln_ratio += self._stretch * away[:, n_pivots:].max(axis=1, initial=0.0)
        if distribution.form:
            ln_ratio += self._shape_reach(theta)
        return np.asarray(ln_ratio < LARGEST_LN_RATIO)

    def _shape_reach(self, theta: Array) -> Array:
        """Return how far the form of high columns rises above its reference."""
        distribution = self.response.distribution
        columns = np.linspace(distribution.pivots[-1], distribution.column_range[1], 12)
        points = distribution.points(columns[1:], np.full(11, distribution.reference_redshift))
        now = distribution.ln_shape(distribution.expand(theta), points)
        then = distribution.ln_shape(self._expanded[None], points)
        return np.asarray((now - then).max(axis=1, initial=0.0))

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
        response = self.response
        expanded, mix = response.distribution.expand(theta), response.mix(theta)
        single = (expanded - self._expanded).astype(np.float32)
        parts = []
        # Block by block, so that f stays in cache between its exponential and its weights.
        for i, (data, block) in enumerate(zip(response.datasets, response.blocks, strict=True)):
            basis, weights, scale = self._blocks[i]
            ratio = single @ basis
            if response.distribution.form:
                points = response.points[i]
                shape = self._shape(expanded, i)
                ratio[:, points.high] += shape[:, points.column]
            np.exp(ratio, out=ratio)
            raw = segmented(ratio, weights, block.segments)
            raw = mixed(raw * scale, block, mix)
            parts.append(QUANTITIES[data.quantity].reduce(data, raw, block.constants))
        return np.concatenate(parts, axis=-1)
