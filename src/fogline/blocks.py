"""The draws that a run gathers block by block: the posterior they ask, thinning, acceptance."""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.checkpoint import RunState

Array = NDArray[np.float64]
LogProb = Callable[[Array], Array]

BLOCK: Final = 20
"""Stored draws of a block."""

MAX_CHAIN_BYTES: Final = 16e6
"""A chain that would outgrow this is thinned by two."""


def no_draws(coords: Array) -> tuple[Array, Array]:
    """Return an empty chain and its ln posterior."""
    return np.empty((0, *coords.shape)), np.empty((0, len(coords)))


def acceptance(state: RunState) -> dict[str, float]:
    """Return the share of proposals taken, of moves that were made at all."""
    return {
        move: float(tally.accepted.mean() / tally.n_proposed)
        for move, tally in state.tallies.items()
        if tally.n_proposed
    }


def thin_if_long(state: RunState) -> None:
    """Drop every other draw where the chain outgrows its share of a file."""
    draw_bytes = state.chain[0].nbytes + state.chain_ln_prob[0].nbytes
    limit = max(int(MAX_CHAIN_BYTES / draw_bytes), 10 * BLOCK)
    # Even, so that the last draw stays and later ones keep an equal distance.
    if len(state.chain) >= limit and len(state.chain) % 2 == 0:
        state.chain, state.chain_ln_prob = (
            state.chain[1::2].copy(),
            state.chain_ln_prob[1::2].copy(),
        )
        state.thin *= 2


def guarded(log_prob: LogProb) -> LogProb:
    """Return `log_prob` that raises on NaN, with the parameters that gave it."""

    def guarded(x: Array) -> Array:
        value = np.asarray(log_prob(x), dtype=np.float64)
        if np.isnan(value).any():
            bad = x[np.isnan(value)][0]
            raise ValueError(f"the posterior is NaN at x = {bad.tolist()}")
        return value

    return guarded
