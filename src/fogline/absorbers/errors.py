"""Errors of measured columns: split-normal in log N, as everywhere in fogline.

The density of a measured y = log N given the true x has the measurement's upper error where x lies
above y, its lower error where x lies below::

    p(y | x) = 2 / [√(2π) (σ_lo + σ_hi)] exp[-(x - y)² / (2 σ²)]
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

Array = NDArray[np.float64]

SMALLEST = 0.02
"""Errors below this [dex] are taken as this: f hardly changes over so little."""

MOST_ERRORS = 48
"""Representative errors over which selection is averaged."""


def density(y: Array, x: Array, lo: Array, hi: Array) -> Array:
    """Return p(y | x) per dex; all broadcast."""
    sigma = np.where(x > y, hi, lo)
    norm = 2.0 / (np.sqrt(2.0 * np.pi) * (lo + hi))
    return np.asarray(norm * np.exp(-0.5 * ((x - y) / sigma) ** 2))


def below(y: Array | float, x: Array, lo: Array, hi: Array) -> Array:
    """Return P(measured < y | x); all broadcast. A measurement below x has its upper error."""
    t = y - x
    low = 2.0 * hi / (lo + hi) * ndtr(np.minimum(t, 0.0) / hi)
    high = 2.0 * lo / (lo + hi) * (ndtr(np.maximum(t, 0.0) / lo) - 0.5)
    return np.asarray(low + high)


def representative(lo: Array, hi: Array) -> tuple[Array, Array]:
    """Return at most `MOST_ERRORS` pairs of errors that stand for those of a whole list."""
    order = np.argsort(lo + hi, kind="stable")
    chosen = np.linspace(0, len(order) - 1, min(MOST_ERRORS, len(order))).round().astype(int)
    return lo[order[chosen]], hi[order[chosen]]


def selected(x: Array, least: float, most: float, lo: Array, hi: Array) -> Array:
    """Return the chance that a true log N is measured within a range, averaged over errors.

    Parameters
    ----------
    x : ndarray, shape (n,)
        True log N.
    least, most : float
        The range; `most` may be infinite.
    lo, hi : ndarray, shape (n_errors,)
        From `representative`.

    Returns
    -------
    ndarray, shape (n,)
    """
    above_least = below(least, x[:, None], lo, hi)
    under_most = below(most, x[:, None], lo, hi) if np.isfinite(most) else 1.0
    return np.asarray((under_most - above_least).mean(axis=1))
