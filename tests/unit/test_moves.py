"""Moves: each leaves a known posterior invariant, and a wrong ratio is noticed."""

import emcee
import numpy as np
import pytest
from emcee.state import State
from scipy.stats import kstest

from fogline.mixture import StudentMixture
from fogline.moves import CountedStretchMove, IndependenceMove, LocalMove, Tally

N_WALKERS, N_DIM = 200, 2
ALPHA = 1e-4  # of the Kolmogorov-Smirnov tests: the chance that a right sampler fails one


def ln_normal(x):
    return -0.5 * (x**2).sum(axis=1)


def shifted_mixture() -> StudentMixture:
    """A proposal that overlaps with the unit normal but is not it."""
    means = np.array([[0.7, 0.0], [-0.5, 0.5]])
    return StudentMixture(np.array([0.6, 0.4]), means, np.stack([0.9 * np.eye(2)] * 2))


class NoRatio(IndependenceMove):
    """Forgets the proposal's density: samples p q in place of p."""

    def _ln_hastings(self, ln_q, ln_q_proposed):
        return np.zeros_like(ln_q)


def make(kind, tally):
    return kind(tally) if kind is CountedStretchMove else kind(shifted_mixture(), tally)


def run(move, n_steps, start=None, log_prob=ln_normal):
    coords = np.random.default_rng(21).normal(size=(N_WALKERS, N_DIM)) if start is None else start
    sampler = emcee.EnsembleSampler(
        len(coords), N_DIM, log_prob, moves=[(move, 1.0)], vectorize=True
    )
    random = np.random.RandomState(22).get_state()
    state = State(coords, log_prob=log_prob(coords), random_state=random)
    options = {"iterations": n_steps, "store": False, "skip_initial_state_check": True}
    return [s.coords.copy() for s in sampler.sample(state, **options)]


def p_values(draws):
    # Every 20th step: nearly independent with acceptances of a half.
    x = np.concatenate(draws[::20])
    return [kstest(x[:, k], "norm").pvalue for k in range(N_DIM)]


@pytest.mark.parametrize("kind", [CountedStretchMove, IndependenceMove, LocalMove])
def test_move_leaves_the_posterior_invariant(kind):
    draws = run(make(kind, Tally(N_WALKERS)), 800)
    assert min(p_values(draws)) > ALPHA


def test_independence_move_without_its_ratio_is_noticed():
    draws = run(NoRatio(shifted_mixture(), Tally(N_WALKERS)), 800)
    assert min(p_values(draws)) < ALPHA


@pytest.mark.parametrize("kind", [CountedStretchMove, IndependenceMove, LocalMove])
def test_tally_counts_what_moved(kind):
    tally = Tally(N_WALKERS)
    draws = run(make(kind, tally), 50)
    start = np.random.default_rng(21).normal(size=(N_WALKERS, N_DIM))
    moved = (np.diff([start, *draws], axis=0) != 0.0).any(axis=2).sum(axis=0)
    assert tally.n_proposed == 50
    assert np.array_equal(tally.accepted, moved)


def test_independence_move_rescues_stuck_walkers():
    # An island of e^-44 of the posterior at (30, 30): stretch moves hardly leave it.
    def islands(x):
        return np.logaddexp(ln_normal(x), -35.0 - 0.5 * ((x - 30.0) ** 2).sum(axis=1) / 1e-4)

    start = np.random.default_rng(23).normal(size=(N_WALKERS, N_DIM))
    start[:10] = 30.0
    independence = run(IndependenceMove(shifted_mixture(), Tally(N_WALKERS)), 30, start, islands)
    # p / q there is e^-35 over the t's tail, about e^-30: below that of the bulk. All get away.
    assert (independence[-1] < 20.0).all()


@pytest.mark.parametrize("kind", [CountedStretchMove, IndependenceMove, LocalMove])
def test_no_move_enters_where_the_posterior_vanishes(kind):
    def half(x):
        return np.where(x[:, 0] > 0.0, ln_normal(x), -np.inf)

    start = np.abs(np.random.default_rng(24).normal(size=(N_WALKERS, N_DIM)))
    start[0, 0] = -0.1  # allowed at the start, and left for good
    draws = run(make(kind, Tally(N_WALKERS)), 60, start, half)
    assert (draws[-1][:, 0] > 0.0).all()
    assert all((d[1:, 0] > 0.0).all() for d in draws)


def test_remembered_densities_are_those_of_the_positions():
    mixture = shifted_mixture()
    move = IndependenceMove(mixture, Tally(N_WALKERS))
    final = run(move, 10)[-1]
    np.testing.assert_allclose(move._current(final), mixture.ln_density(final), rtol=1e-12)
    final[::3] += 0.5  # as another move would
    np.testing.assert_allclose(move._current(final), mixture.ln_density(final), rtol=1e-12)
