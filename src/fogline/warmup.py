"""Warm-up of an ensemble: start from the prior, mixtures fitted on the way, stuck walkers rescued.

Nothing here touches samples that count.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.blocks import acceptance, no_draws
from fogline.checkpoint import RunState
from fogline.mixture import StudentMixture
from fogline.mixture_fit import POOLED_WEIGHT, fit_student_mixture
from fogline.settings import SamplerSettings

Array = NDArray[np.float64]
LogProb = Callable[[Array], Array]

START_ROUNDS: Final = 100
"""Draws from the prior for a walker to find a finite posterior."""

NEAR: Final = 1e-3
"""Spread of walkers around a given point; stretch moves widen it to that of the posterior."""

FIT_SAMPLES: Final = 20_000
"""Samples that a mixture is fitted to, at most."""

EXTRA_ROUNDS: Final = (2, 3)
"""Further rounds, as multiples of the last one's length, where its mixture is not good enough."""

GOOD_ACCEPTANCE: Final = 0.45
"""Acceptance of independence proposals that makes further rounds needless. Below, walkers get
stuck where the mixture is too thin, and counted steps are lost by thousands."""

RESCUE_DRAWS: Final = 16
"""Draws of the mixture per walker among which those that are moved find a place."""

STUCK: Final = 6.0
"""Excess of ln(p / q) over its median that marks a walker as stuck. Of a posterior that the
mixture fits one sample in a thousand has more, so that hardly any is moved in vain."""


def schedule(settings: SamplerSettings) -> tuple[tuple[int, int], ...]:
    """Return steps and components of every warm-up round, those included that may not be needed."""
    rounds = tuple(zip(settings.warm_up, settings.components, strict=True))
    steps, n_components = rounds[-1]
    return rounds + tuple((k * steps, n_components) for k in EXTRA_ROUNDS)


def next_round(state: RunState, settings: SamplerSettings) -> int:
    """Return the round that follows; `EXTRA_ROUNDS` are left out once the mixture is good."""
    n_asked = len(settings.warm_up)
    # Without independence proposals there is nothing to wait for.
    good = acceptance(state).get("independence", 1.0) >= GOOD_ACCEPTANCE
    if state.round + 1 >= n_asked and good:
        return n_asked + len(EXTRA_ROUNDS)
    return state.round + 1


def first_state(
    log_prob: LogProb,
    n_walkers: int,
    n_dim: int,
    start: np.random.SeedSequence,
    steps: np.random.SeedSequence,
    around: Array | None = None,
) -> RunState:
    """Return walkers drawn from the prior, wider than any posterior; or all near one point.

    Parameters
    ----------
    log_prob : callable
        ``(n, n_dim) -> (n,)``.
    n_walkers, n_dim : int
        Shape of the ensemble.
    start, steps : SeedSequence
        Streams of the start and of emcee's RandomState.
    around : ndarray, shape (n_dim,), optional
        The point; none by default.

    Returns
    -------
    RunState

    Raises
    ------
    ValueError
        If no draw has a finite posterior.
    """
    rng = np.random.default_rng(start)

    def draw(n: int) -> Array:
        noise = rng.standard_normal((n, n_dim))
        return noise if around is None else around + NEAR * noise

    coords = draw(n_walkers)
    ln_prob = log_prob(coords)
    for _ in range(START_ROUNDS):
        lost = np.flatnonzero(~np.isfinite(ln_prob))
        if not len(lost):
            break
        coords[lost] = draw(len(lost))
        ln_prob[lost] = log_prob(coords[lost])
    if not np.isfinite(ln_prob).any():
        where = "from the prior" if around is None else "near the given start"
        raise ValueError(f"no draw {where} has a finite posterior")
    random_state = np.random.RandomState(np.random.MT19937(steps)).get_state()
    return RunState(0, 0, coords, ln_prob, random_state, 1, None, *no_draws(coords), {})


def fit_round(state: RunState, n_components: int, rng: np.random.Generator) -> StudentMixture:
    """Return a mixture fitted to the later half of a round's draws."""
    later = state.chain[len(state.chain) // 2 :].reshape(-1, state.coords.shape[1])
    if len(later) > FIT_SAMPLES:
        later = later[rng.choice(len(later), FIT_SAMPLES, replace=False)]
    pooled_weight = POOLED_WEIGHT if state.round else 0.0
    return fit_student_mixture(later, n_components, rng, pooled_weight=pooled_weight)


def rescue(state: RunState, log_prob: LogProb, rng: np.random.Generator) -> int:
    """Move walkers that the independence move could not: importance-weighted draws replace them.

    A walker where ln(p / q) is e^20 above the others' refuses every proposal of the mixture, and
    stretch moves seldom reach it. Where it starts to count is free to choose; if its place has
    weight in the posterior, counted samples find it again.

    Parameters
    ----------
    state : RunState
        Its positions are changed.
    log_prob : callable
        ``(n, n_dim) -> (n,)``.
    rng : Generator
        Draws the new places.

    Returns
    -------
    int
        Walkers moved.
    """
    mixture = state.mixture
    assert mixture is not None
    ln_weight = state.ln_prob - mixture.ln_density(state.coords)
    # A walker still at -inf is lost as well, though its weight is the least of all.
    stuck = np.flatnonzero((ln_weight > np.median(ln_weight) + STUCK) | (ln_weight == -np.inf))
    if not len(stuck):
        return 0
    draws = mixture.draw(RESCUE_DRAWS * len(state.coords), rng)
    ln_prob = log_prob(draws)
    ln_weight = ln_prob - mixture.ln_density(draws)
    weight = np.exp(ln_weight - ln_weight.max())
    if not np.isfinite(weight).all():
        return 0  # no draw has a finite posterior: the mixture is no help yet
    chosen = rng.choice(len(draws), size=len(stuck), p=weight / weight.sum())
    state.coords[stuck], state.ln_prob[stuck] = draws[chosen], ln_prob[chosen]
    return len(stuck)
