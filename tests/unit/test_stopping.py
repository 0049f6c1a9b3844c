"""When an ensemble stops: on independent draws of a unit normal, so that the target is met."""

from dataclasses import replace

import numpy as np
import pytest

from fogline.blocks import no_draws
from fogline.checkpoint import RunState
from fogline.settings import SamplerSettings
from fogline.stopping import ending, look
from fogline.stuck import longest_rests, stuck_walkers

N_STORED, N_WALKERS, N_DIM = 400, 32, 3
SETTINGS = SamplerSettings(
    walkers=N_WALKERS,
    ensembles=2,
    seed=1,
    target_ess=4000,
    max_rhat=1.01,
    max_steps=1000,
    thin=1,
    warm_up=(10,),
    components=(1,),
    independence_share=0.5,
)


@pytest.fixture
def state():
    chain = np.random.default_rng(61).normal(size=(N_STORED, N_WALKERS, N_DIM))
    ln_prob = -0.5 * (chain**2).sum(axis=2)
    random_state = np.random.RandomState(1).get_state()
    return RunState(
        4, N_STORED, chain[-1], ln_prob[-1], random_state, 1, None, *no_draws(chain[-1]), {}
    ), (chain, ln_prob)


def looked_at(state, settings=SETTINGS):
    now, (now.chain, now.chain_ln_prob) = state
    now.history = np.vstack([now.history, look(now, settings)])
    return ending(now, settings)


def test_stops_once_the_target_is_met(state):
    verdict = looked_at(state)
    assert verdict.reached
    assert verdict.reason.startswith(
        "target met after 400 steps: autocorrelation time 1, R-hat 1.0"
    )


def test_goes_on_below_the_target(state):
    assert looked_at(state, replace(SETTINGS, target_ess=40_000)) is None


def test_goes_on_while_a_walker_is_stuck(state):
    _, (_, ln_prob) = state
    ln_prob[:, 9] -= 20.0
    assert looked_at(state) is None


def test_says_at_the_step_limit_that_a_walker_is_stuck(state):
    _, (_, ln_prob) = state
    ln_prob[:, 9] -= 20.0
    verdict = looked_at(state, replace(SETTINGS, max_steps=N_STORED))
    assert not verdict.reached
    assert verdict.reason.startswith("step limit of 400 reached: 400 steps, autocorrelation time 1")
    assert verdict.reason.endswith(", walkers stuck: 1")


def test_longest_rests_by_hand():
    moved = np.array([[1, 0, 0], [0, 0, 1], [0, 0, 0], [1, 0, 0]], dtype=bool)
    np.testing.assert_array_equal(longest_rests(moved), [2, 4, 2])


def test_each_way_of_being_stuck(state):
    _, (chain, ln_prob) = state
    chain[:, 3] = chain[0, 3]
    chain[100:230, 5] = chain[100, 5]
    ln_prob[:, 7] -= 20.0
    found = {
        what: np.flatnonzero(who).tolist() for what, who in stuck_walkers(chain, ln_prob).items()
    }
    assert found == {
        "hardly move": [3],
        "rest at one place for 30% of the chain": [3, 5],
        "stay far below the others in ln posterior": [7],
    }
