"""One ensemble from its seed to its result: warm-up, frozen mixture, counted samples.

The first warm-up round knows only stretch moves. After each round a Student-t mixture is fitted
to the round's later half, and the next one mixes independence proposals from it and local moves
along it with stretch moves. After the last the mixture is frozen and samples count. The run is a
row of blocks; at the end of each the state in `fogline.checkpoint.RunState` is all that the rest
depends on, so a run that is killed and resumed gives the same result bit for bit.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Final

import emcee
import numpy as np
from emcee.state import State
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]

from fogline.blocks import BLOCK, acceptance, guarded, no_draws, thin_if_long
from fogline.chains import EnsembleResult
from fogline.checkpoint import Keeper, RunState
from fogline.evidence import importance_sample
from fogline.moves import CountedStretchMove, IndependenceMove, LocalMove, Tally
from fogline.progress import Progress, Silent
from fogline.settings import SamplerSettings
from fogline.stopping import ending, look, status, worth_a_look
from fogline.warmup import first_state, fit_round, next_round, rescue, schedule

__all__ = ["EnsembleResult", "run_ensemble"]

Array = NDArray[np.float64]
LogProb = Callable[[Array], Array]

MOVES: Final = ("independence", "local", "stretch")
"""Moves of a round; the first has stretch moves alone."""

LOCAL_SHARE: Final = 0.7
"""Share of local mixture moves in what independence proposals leave."""

WARM_UP_THIN: Final = 2
"""Steps between stored draws of the warm-up: the mixtures need many samples, few of them alike."""


def run_ensemble(
    log_prob: LogProb,
    n_dim: int,
    settings: SamplerSettings,
    index: int,
    checkpoint: Path | None = None,
    fingerprint: str = "",
    progress: Progress | None = None,
    around: Array | None = None,
) -> EnsembleResult:
    """Sample a posterior whose prior is a unit normal in every direction.

    Parameters
    ----------
    log_prob : callable
        ``(n, n_dim) -> (n,)``: ln of normalised prior times likelihood; -inf allowed.
    n_dim : int
        Number of parameters.
    settings : SamplerSettings
        Walkers, rounds, targets.
    index : int
        Which ensemble of the analysis; each has a random stream of its own.
    checkpoint : Path, optional
        File to resume from and to keep; none by default.
    fingerprint : str, optional
        Of data, model and settings: a checkpoint with another one is left aside.
    progress : Progress, optional
        Told how the run goes; nobody by default.
    around : ndarray, shape (n_dim,), optional
        Point near which all walkers begin. By default they are draws of the prior, so that
        ensembles start independently and their agreement means something.

    Returns
    -------
    EnsembleResult

    Raises
    ------
    ValueError
        If `log_prob` gives NaN, if no walker finds a finite start, or if there are fewer than
        two walkers a dimension.
    """
    # One BLAS thread: products are then rounded alike in every run, and ensembles do not compete.
    with threadpool_limits(1, user_api="blas"):
        run = _Run(guarded(log_prob), n_dim, settings, index, progress or Silent(), around)
        return run.to_end(Keeper(checkpoint, f"{fingerprint}/{index}"))


class _Run:
    """One run: its fixed inputs, and the methods that move a `RunState` on."""

    def __init__(
        self,
        log_prob: LogProb,
        n_dim: int,
        settings: SamplerSettings,
        index: int,
        progress: Progress,
        around: Array | None,
    ) -> None:
        if settings.walkers < 2 * n_dim:
            raise ValueError(f"{n_dim} parameters need {2 * n_dim} walkers or more")
        self.log_prob = log_prob
        self.n_dim = n_dim
        self.settings = settings
        self.index = index
        self.progress = progress
        self.around = around
        self.rounds = schedule(settings)
        streams = np.random.SeedSequence(settings.seed).spawn(max(settings.ensembles, index + 1))
        # Streams: the start, emcee's RandomState, the importance draws, one for each fit. None
        # is used twice, so that none has to be in a checkpoint but emcee's.
        self.streams = streams[index].spawn(3 + len(self.rounds))

    def to_end(self, keeper: Keeper) -> EnsembleResult:
        """Run from the start, or from a checkpoint, to the result."""
        state, message = keeper.load()
        if message:
            self.progress.note(message)
        if state is None:
            start, steps = self.streams[:2]
            n_walkers = self.settings.walkers
            state = first_state(self.log_prob, n_walkers, self.n_dim, start, steps, self.around)
            self.clear(state)
        else:
            self.progress.note(f"resumed from a checkpoint, {self.stage(state)} step {state.step}")
        self.warm_up(state, keeper)
        self.count(state, keeper)
        self.progress.close()
        return self.result(state)

    def stage(self, state: RunState) -> str:
        """Return the name of the round."""
        if state.round == len(self.rounds):
            return "sampling"
        n_asked = len(self.settings.warm_up)
        more = " (more, the mixture is not good enough)" if state.round >= n_asked else ""
        return f"warm-up {state.round + 1}{more or f'/{n_asked}'}"

    def clear(self, state: RunState) -> None:
        """Forget the draws of a round and begin the next."""
        counted = state.round == len(self.rounds)
        state.step, state.thin = 0, self.settings.thin if counted else WARM_UP_THIN
        state.chain, state.chain_ln_prob = no_draws(state.coords)
        state.tallies = {move: Tally(len(state.coords)) for move in MOVES}

    def warm_up(self, state: RunState, keeper: Keeper) -> None:
        """Run what is left of the warm-up."""
        while state.round < len(self.rounds):
            n_steps = self.rounds[state.round][0]
            self.progress.stage(self.stage(state), n_steps)
            self.progress.advance(state.step)
            while state.step < n_steps:
                self.block(state, n_steps)
                keeper.save(state)
            self.finish_round(state)

    def count(self, state: RunState, keeper: Keeper) -> None:
        """Sample until the target or the step limit."""
        self.progress.stage(self.stage(state), self.settings.max_steps)
        self.progress.advance(state.step)
        while not ending(state, self.settings):
            self.block(state, self.settings.max_steps)
            if worth_a_look(state, self.settings):
                state.history = np.vstack([state.history, look(state, self.settings)])
                self.progress.status(status(state))
            keeper.save(state)

    def block(self, state: RunState, n_steps: int) -> None:
        """Make the steps of one block, at most to `n_steps`, and store every thin-th."""
        left = -(-(n_steps - state.step) // state.thin)
        n_draws = min(BLOCK, left)
        sampler = emcee.EnsembleSampler(
            len(state.coords), self.n_dim, self.log_prob, moves=self.moves(state), vectorize=True
        )
        start = State(state.coords, log_prob=state.ln_prob, random_state=state.random_state)
        coords, ln_prob = [], []
        for now in sampler.sample(
            start,
            iterations=n_draws,
            thin_by=state.thin,
            store=False,
            skip_initial_state_check=True,
        ):
            coords.append(now.coords.copy())
            ln_prob.append(now.log_prob.copy())
        state.coords, state.ln_prob, state.random_state = coords[-1], ln_prob[-1], now.random_state
        state.chain = np.concatenate([state.chain, coords])
        state.chain_ln_prob = np.concatenate([state.chain_ln_prob, ln_prob])
        state.step += n_draws * state.thin
        self.progress.advance(n_draws * state.thin)
        thin_if_long(state)

    def moves(self, state: RunState) -> list[tuple[emcee.moves.Move, float]]:
        """Return the round's moves; made anew for each block, so that they remember nothing."""
        stretch = CountedStretchMove(state.tallies["stretch"])
        if state.mixture is None:
            return [(stretch, 1.0)]
        independence = IndependenceMove(state.mixture, state.tallies["independence"])
        local = LocalMove(state.mixture, state.tallies["local"])
        share = self.settings.independence_share
        rest = 1.0 - share
        return [
            (independence, share),
            (local, LOCAL_SHARE * rest),
            (stretch, (1.0 - LOCAL_SHARE) * rest),
        ]

    def finish_round(self, state: RunState) -> None:
        """Fit the mixture to the later half of the round, and begin the next."""
        rng = np.random.default_rng(self.streams[3 + state.round])
        state.mixture = fit_round(state, self.rounds[state.round][1], rng)
        n_moved = rescue(state, self.log_prob, rng)
        rates = ", ".join(f"{m} {100 * a:.0f}%" for m, a in acceptance(state).items())
        rescued = f", {n_moved} stuck walkers moved" if n_moved else ""
        self.progress.note(f"{self.stage(state)} done, accepted: {rates}{rescued}")
        state.warm_up += state.step
        state.round = next_round(state, self.settings)
        self.clear(state)

    def result(self, state: RunState) -> EnsembleResult:
        """Return the result; the importance draws have a stream of their own."""
        assert state.mixture is not None
        rng = np.random.default_rng(self.streams[2])
        verdict = ending(state, self.settings)
        assert verdict is not None
        accepted = np.sum([t.accepted for t in state.tallies.values()], axis=0)
        n_proposed = sum(t.n_proposed for t in state.tallies.values())
        return EnsembleResult(
            chain=state.chain,
            ln_prob=state.chain_ln_prob,
            steps=state.step,
            thin=state.thin,
            warm_up=state.warm_up,
            acceptance=acceptance(state),
            walker_acceptance=accepted / n_proposed,
            mixture=state.mixture,
            history=state.history,
            stopped=verdict.reached,
            reason=verdict.reason,
            seed=self.settings.seed,
            index=self.index,
            importance=importance_sample(self.log_prob, state.mixture, rng),
        )
