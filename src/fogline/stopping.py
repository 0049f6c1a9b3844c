"""When an ensemble has sampled enough, judged from its own chain alone.

`fogline.convergence` gives the verdict over all ensembles; this only decides when to stop. A look
costs about as much as a hundred steps, so looks are spaced in proportion to the chain's length,
and ranks are only computed once the autocorrelation time promises that the target is met.
"""

from __future__ import annotations

from typing import Final, NamedTuple

import numpy as np
from numpy.typing import NDArray

from fogline.checkpoint import RunState
from fogline.diagnostics import autocorrelation_times, effective_sizes, split_rhat
from fogline.settings import SamplerSettings
from fogline.stuck import stuck_walkers

Array = NDArray[np.float64]

MARGIN: Final = 1.2
"""An ensemble aims at this many times its share of the target."""

MIN_TIMES: Final = 50.0
"""Least chain length in autocorrelation times (emcee's documentation)."""

MAX_GROWTH: Final = 1.25
"""Largest ratio of the autocorrelation times of the whole chain and of its first half."""

SPACING: Final = 1.1
"""Growth of the chain between two looks."""


class Ending(NamedTuple):
    """Why an ensemble ends."""

    reached: bool
    reason: str


def own_target(settings: SamplerSettings) -> float:
    """Return the effective sample size that one ensemble aims at."""
    return MARGIN * settings.target_ess / settings.ensembles


def worth_a_look(state: RunState, settings: SamplerSettings) -> bool:
    """Return whether the chain has grown enough since the last look."""
    last = state.history[-1, 0] if len(state.history) else 0.0
    return state.step >= settings.max_steps or state.step >= SPACING * last


def look(state: RunState, settings: SamplerSettings) -> Array:
    """Return a row of the history (`fogline.chains.HISTORY`)."""
    chain, thin = state.chain, state.thin
    tau = thin * float(autocorrelation_times(chain).max())
    tau_half = thin * float(autocorrelation_times(chain[: len(chain) // 2]).max())
    promised = state.step * chain.shape[1] / tau
    if (
        state.step < MIN_TIMES * tau
        or tau > MAX_GROWTH * tau_half
        or promised < own_target(settings)
    ):
        return np.array([state.step, tau, np.nan, np.nan, np.nan, np.nan])
    parameters = [chain[:, :, k] for k in range(chain.shape[2])]
    rhat = max(split_rhat([x]) for x in parameters)
    sizes = np.array([effective_sizes(x) for x in parameters])
    walkers = np.any(list(stuck_walkers(chain, state.chain_ln_prob).values()), axis=0)
    return np.array([state.step, tau, rhat, *sizes.min(axis=0), walkers.sum()])


def ending(state: RunState, settings: SamplerSettings) -> Ending | None:
    """Return why the ensemble ends here, or None where it goes on."""
    if len(state.history):
        steps, tau, rhat, bulk, tail, stuck = state.history[-1]
        enough = min(bulk, tail) >= own_target(settings)
        if rhat < settings.max_rhat and enough and stuck == 0:
            text = f"target met after {steps:.0f} steps: {_words(tau, rhat, bulk, tail, stuck)}"
            return Ending(True, text)
    if state.step >= settings.max_steps:
        return Ending(False, f"step limit of {settings.max_steps} reached: {status(state)}")
    return None


def status(state: RunState) -> str:
    """Return the latest look in words."""
    if not len(state.history):
        return "not looked at yet"
    steps, *numbers = state.history[-1]
    return f"{steps:.0f} steps, {_words(*numbers)}"


def _words(tau: float, rhat: float, bulk: float, tail: float, stuck: float) -> str:
    text = f"autocorrelation time {tau:.0f}"
    if np.isnan(rhat):
        return text
    text += f", R-hat {rhat:.4f}, ESS {min(bulk, tail):.0f}"
    return f"{text}, walkers stuck: {stuck:.0f}" if stuck else text
