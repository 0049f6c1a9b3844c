"""Moves of the ensemble: emcee's stretch move without its loop, and two along a frozen mixture.

All are ordinary emcee moves: they draw from the ``RandomState`` that emcee hands them alone, so
that its state and the walkers' positions determine the rest of a run.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from emcee.moves import Move, StretchMove
from emcee.state import State
from numpy.typing import NDArray

from fogline.mixture import StudentMixture, ln_sum

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


class Tally:
    """How often walkers were proposed a new position and took it.

    Attributes
    ----------
    n_proposed : int
        Proposals made to each walker.
    accepted : ndarray of int, shape (n_walkers,)
        Proposals that each walker took.
    """

    def __init__(self, n_walkers: int) -> None:
        self.n_proposed = 0
        self.accepted = np.zeros(n_walkers, dtype=np.int64)

    def add(self, accepted: Mask) -> None:
        """Count one proposal to every walker."""
        self.n_proposed += 1
        self.accepted += accepted

    def clear(self) -> None:
        """Start again at zero."""
        self.n_proposed = 0
        self.accepted[:] = 0


class CountedStretchMove(StretchMove):
    """emcee's stretch move (Goodman & Weare 2010) with its acceptance vectorised and counted.

    The proposal is emcee's own. Its acceptance loops over walkers in Python, which costs as much
    as a fast posterior does.

    Parameters
    ----------
    tally : Tally
        Counts the proposals.
    """

    def __init__(self, tally: Tally) -> None:
        super().__init__()
        self.tally = tally

    def propose(self, model: Any, state: State) -> tuple[State, Mask]:
        """Move the one half of the walkers along lines through the other, then the reverse."""
        accepted = np.zeros(len(state.coords), dtype=bool)
        half = np.arange(len(state.coords)) % 2
        model.random.shuffle(half)
        for side in range(2):
            moving = half == side
            others = [state.coords[~moving]]
            proposed, ln_factor = self.get_proposal(state.coords[moving], others, model.random)
            ln_prob, _ = model.compute_log_prob_fn(proposed)
            accepted[moving] = _accept(ln_prob, state.log_prob[moving], ln_factor, model.random)
            new = State(proposed, log_prob=ln_prob)
            state = self.update(state, new, accepted, moving)
        self.tally.add(accepted)
        return state, accepted


class IndependenceMove(Move):
    """Proposals drawn from a frozen mixture, whatever the walkers' positions.

    Metropolis-Hastings with ratio p(y) q(x) / (p(x) q(y)), q the mixture's density: the
    posterior is left invariant because q does not change while samples count.

    Parameters
    ----------
    mixture : StudentMixture
        The proposal.
    tally : Tally
        Counts the proposals.
    """

    def __init__(self, mixture: StudentMixture, tally: Tally) -> None:
        self.mixture = mixture
        self.tally = tally
        # Densities where the walkers are, kept from one proposal to the next. A matrix product may
        # round a row differently in another batch, so a resumed run must start from no memory
        # exactly where the uninterrupted one did: a move lives for one block.
        self._coords: Array = np.empty((0, 0))
        self._ln_q: Array = np.empty(0)

    def propose(self, model: Any, state: State) -> tuple[State, Mask]:
        """Propose a draw of the mixture to every walker."""
        ln_q = self._current(state.coords)
        proposed = self.mixture.draw(len(state.coords), model.random)
        ln_q_proposed = self.mixture.ln_density(proposed)
        ln_prob, _ = model.compute_log_prob_fn(proposed)
        ln_factor = self._ln_hastings(ln_q, ln_q_proposed)
        accepted = _accept(ln_prob, state.log_prob, ln_factor, model.random)
        state = self.update(state, State(proposed, log_prob=ln_prob), accepted)
        self._coords[accepted] = proposed[accepted]
        self._ln_q[accepted] = ln_q_proposed[accepted]
        self.tally.add(accepted)
        return state, accepted

    def _ln_hastings(self, ln_q: Array, ln_q_proposed: Array) -> Array:
        return ln_q - ln_q_proposed

    def _current(self, coords: Array) -> Array:
        """Return the mixture's ln density where the walkers are; only those that moved anew."""
        if self._coords.shape != coords.shape:
            self._coords, self._ln_q = coords.copy(), self.mixture.ln_density(coords)
            return self._ln_q
        moved = (coords != self._coords).any(axis=1)
        if moved.any():
            self._coords[moved] = coords[moved]
            self._ln_q[moved] = self.mixture.ln_density(coords[moved])
        return self._ln_q


class LocalMove(Move):
    """Steps that leave the mixture invariant, short ones included.

    Of the mixture's latent component c and scale u a pair is drawn given the walker's position x;
    given the pair the mixture is normal, and x' = mean + sqrt(1 - b^2) (x - mean) + b (a draw
    about zero), b in (0, 1), is reversible with respect to it. Hence the ratio of
    Metropolis-Hastings is that of p / q alone, as for an independence proposal; but p / q hardly
    changes over a short step. A walker in a tail that the mixture is too thin for, where every
    independence proposal is refused, walks out of it.

    Parameters
    ----------
    mixture : StudentMixture
        Frozen.
    tally : Tally
        Counts the proposals.
    """

    def __init__(self, mixture: StudentMixture, tally: Tally) -> None:
        self.mixture = mixture
        self.tally = tally

    def propose(self, model: Any, state: State) -> tuple[State, Mask]:
        """Propose a step of random length to every walker."""
        proposed, ln_q = self._step(state.coords, model.random)
        ln_prob, _ = model.compute_log_prob_fn(proposed)
        ln_factor = ln_q - self.mixture.ln_density(proposed)
        accepted = _accept(ln_prob, state.log_prob, ln_factor, model.random)
        self.tally.add(accepted)
        return self.update(state, State(proposed, log_prob=ln_prob), accepted), accepted

    def _step(self, x: Array, random: np.random.RandomState) -> tuple[Array, Array]:
        """Return proposals and the mixture's ln density where the walkers are."""
        mixture, (n, d) = self.mixture, x.shape
        ln_part, distance = mixture.ln_components(x)
        ln_q = ln_sum(ln_part)
        # Gumbel noise picks a component in proportion to its responsibility.
        component = (ln_part + random.gumbel(size=ln_part.shape)).argmax(axis=0)
        m = distance[component, np.arange(n)]
        scale = random.gamma(0.5 * (mixture.dof + d), size=n) / (0.5 * (mixture.dof + m))
        length = random.uniform(size=(n, 1))
        noise = mixture.scaled(component, random.standard_normal(size=(n, d)))
        mean = mixture.means[component]
        kept = np.sqrt(1.0 - length**2) * (x - mean)
        return mean + kept + length * noise / np.sqrt(scale)[:, None], ln_q


def _accept(
    ln_prob_new: Array, ln_prob_old: Array, ln_factor: Array, random: np.random.RandomState
) -> Mask:
    """Return which proposals are taken; one that has no probability never is."""
    # A walker at -inf (allowed at the start) takes whatever is finite.
    with np.errstate(invalid="ignore", divide="ignore"):
        ln_ratio = ln_prob_new - ln_prob_old + ln_factor
        taken = np.log(random.uniform(size=len(ln_ratio))) < ln_ratio
    return np.asarray(taken & (ln_prob_new > -np.inf))
