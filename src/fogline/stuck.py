"""Walkers of one ensemble that do not sample what the others sample."""

from __future__ import annotations

from typing import Final

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

OUTLYING: Final = 8.0
"""Deficit of a walker's mean ln posterior, in robust standard deviations of all walkers' means."""

FAR_OUT: Final = 2.0
"""The same in robust standard deviations of ln posterior itself: where walkers move slowly their
means have heavy tails, and one that merely lingered is not stuck."""

IMMOBILE: Final = 0.1
"""Share of the median walker's moves below which a walker is stuck."""

LONGEST_REST: Final = 0.3
"""Share of the chain that no walker rests at one place."""


def stuck_walkers(chain: Array, ln_prob: Array) -> dict[str, Mask]:
    """Return which walkers hardly move, rest too long, or stay far out in ln posterior.

    Parameters
    ----------
    chain : ndarray, shape (n_stored, n_walkers, n_dim)
    ln_prob : ndarray, shape (n_stored, n_walkers)

    Returns
    -------
    dict
        What they do, in words, and the walkers that do, shape (n_walkers,).
    """
    moved = (np.diff(chain, axis=0) != 0.0).any(axis=2)
    share = moved.mean(axis=0)
    mean_ln_prob = ln_prob.mean(axis=0)
    deficit = np.median(mean_ln_prob) - mean_ln_prob
    far = np.maximum(OUTLYING * _spread(mean_ln_prob), FAR_OUT * _spread(ln_prob))
    return {
        "hardly move": share <= IMMOBILE * np.median(share),
        f"rest at one place for {LONGEST_REST:.0%} of the chain": (
            longest_rests(moved) > LONGEST_REST * len(moved)
        ),
        "stay far below the others in ln posterior": deficit > far,
    }


def _spread(x: Array) -> float:
    """Return a robust standard deviation."""
    # 1.4826 median absolute deviations are a standard deviation of a normal distribution.
    return float(1.4826 * np.median(np.abs(x - np.median(x))))


def longest_rests(moved: Mask) -> NDArray[np.int64]:
    """Return each walker's longest run without a move, from (n_stored - 1, n_walkers)."""
    now = np.zeros(moved.shape[1], dtype=np.int64)
    longest = now.copy()
    for row in moved:
        now = np.where(row, 0, now + 1)
        longest = np.maximum(longest, now)
    return longest
