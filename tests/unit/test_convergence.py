"""The verdict: a healthy set of ensembles passes, and each planted fault alone turns it, in words.

Healthy ensembles are independent draws of a unit normal, so that everything about them is known.
"""

import json
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fogline.chains import EnsembleResult
from fogline.convergence import aligned, assess
from fogline.convergence_checks import chain_lengths
from fogline.diagnostics import (
    as_chains,
    autocorrelation_times,
    effective_sizes,
    growth,
    rank_normalise,
    split_rhat,
)
from fogline.evidence import Importance
from fogline.mixture import StudentMixture
from fogline.settings import SamplerSettings

N_STORED, N_WALKERS, N_DIM = 200, 32, 3
NAMES = ("a", "b", "c")

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


def weights(**changes) -> Importance:
    one = np.ones(N_DIM)
    healthy = Importance(-5.0, 0.01, 0.3, 0.3, 20_000, 0.0 * one, one, 0.01 * one, 0.01 * one)
    return replace(healthy, **changes)


def ensemble(index: int, chain=None, **changes) -> EnsembleResult:
    if chain is None:
        rng = np.random.default_rng([41, index])
        chain = rng.normal(size=(N_STORED, N_WALKERS, N_DIM))
    result = EnsembleResult(
        chain=chain,
        ln_prob=-0.5 * (chain**2).sum(axis=2),
        steps=len(chain),
        thin=1,
        warm_up=10,
        acceptance={"stretch": 0.3, "independence": 0.5},
        walker_acceptance=np.full(N_WALKERS, 0.4),
        mixture=StudentMixture(np.ones(1), np.zeros((1, N_DIM)), np.eye(N_DIM)[None]),
        history=np.empty((0, 6)),
        stopped=True,
        reason="target met",
        seed=1,
        index=index,
        importance=weights(),
    )
    return replace(result, **changes)


def correlated(index: int, tau: float) -> np.ndarray:
    """Autoregressive chains with unit variance and this integrated autocorrelation time."""
    rho = (tau - 1.0) / (tau + 1.0)
    rng = np.random.default_rng([42, index])
    x = np.empty((N_STORED, N_WALKERS, N_DIM))
    x[0] = rng.normal(size=x[0].shape)
    for t in range(1, N_STORED):
        x[t] = rho * x[t - 1] + np.sqrt(1.0 - rho**2) * rng.normal(size=x[t].shape)
    return x


def reasons_of(*results, settings=SETTINGS) -> list[str]:
    report = assess(results, settings, NAMES)
    assert report.converged == (not report.reasons)
    return list(report.reasons)


def test_healthy_ensembles_converge():
    assert reasons_of(ensemble(0), ensemble(1)) == []


def test_ensemble_elsewhere_fails_by_rhat_and_means():
    other = ensemble(1).chain + np.array([0.0, 0.5, 0.0])
    rhat, means = reasons_of(
        ensemble(0),
        ensemble(1, other, importance=bare(other)),
        settings=replace(SETTINGS, target_ess=500),
    )
    assert rhat.startswith("R-hat is not below 1.01 in 1 of 3 parameters, worst b: 1.0")
    assert means.startswith("ensemble 0 and ensemble 1 disagree: means of b differ by 0.")


def test_small_shift_fails_by_means_alone():
    # R-hat of a shift of 0.15 σ between two chains is about 1.003: it passes, the means do not.
    other = ensemble(1).chain + np.array([0.15, 0.0, 0.0])
    (reason,) = reasons_of(
        ensemble(0), ensemble(1, other, importance=weights(mean=other.mean((0, 1))))
    )
    assert reason.startswith("ensemble 0 and ensemble 1 disagree: means of a differ by 0.1")


def test_other_width_fails_by_widths():
    other = ensemble(1).chain * np.array([1.0, 1.0, 1.2])
    reasons = reasons_of(ensemble(0), ensemble(1, other, importance=weights(sd=other.std((0, 1)))))
    assert any("widths of c differ by" in reason for reason in reasons)


def test_few_effective_samples_fail():
    demanding = replace(SETTINGS, target_ess=10**6)
    bulk, tail = reasons_of(ensemble(0), ensemble(1), settings=demanding)
    assert bulk.startswith("bulk effective sample size is below 1e+06 in 3 of 3 parameters")
    assert tail.startswith("tail effective sample size is below 1e+06 in 3 of 3 parameters")


def test_step_limit_fails():
    stopped = ensemble(1, stopped=False, reason="step limit of 1000 reached")
    assert reasons_of(ensemble(0), stopped) == ["ensemble 1: step limit of 1000 reached"]


def test_walker_that_never_moves_fails():
    chain = ensemble(1).chain.copy()
    chain[:, 7] = chain[0, 7]
    hardly, rests = reasons_of(ensemble(0), ensemble(1, chain))
    assert hardly == "ensemble 1: 1 of 32 walkers hardly move (first: 7)"
    assert rests == "ensemble 1: 1 of 32 walkers rest at one place for 30% of the chain (first: 7)"


def test_walker_that_rests_for_long_fails():
    chain = ensemble(1).chain.copy()
    chain[100:170, 4] = chain[100, 4]
    (reason,) = reasons_of(ensemble(0), ensemble(1, chain))
    assert reason == "ensemble 1: 1 of 32 walkers rest at one place for 30% of the chain (first: 4)"


def test_walker_far_out_in_ln_posterior_fails():
    sick = ensemble(1)
    sick.ln_prob[:, 9] -= 20.0
    (reason,) = reasons_of(ensemble(0), sick)
    assert reason.startswith(
        "ensemble 1: 1 of 32 walkers stay far below the others in ln posterior"
    )
    assert reason.endswith("(first: 9)")


def test_walker_that_lingered_is_not_stuck():
    # Half a standard deviation of ln posterior (1.2 for three normal dimensions) below the others
    # is far beyond the scatter of the walkers' means, 0.09, but no sign of being stuck.
    slow = ensemble(1)
    slow.ln_prob[:, 9] -= 0.9
    assert reasons_of(ensemble(0), slow) == []


def test_growing_autocorrelation_time_fails():
    # A random walk: the time grows with the chain, whatever its length.
    rng = np.random.default_rng(43)
    walk = np.cumsum(rng.normal(size=(N_STORED, N_WALKERS, N_DIM)), axis=0)
    reasons = reasons_of(ensemble(0), ensemble(1, walk))
    assert any("ensemble 1: the autocorrelation time still grows" in r for r in reasons)


def test_growth_alone_fails_a_chain_that_looks_long_enough():
    table = [
        (1000, 10.0),
        (2000, 13.0),
    ]  # 150 times long, and 1.3 times as much at twice the length
    (reason,) = chain_lengths([ensemble(0)], [table])
    assert "the autocorrelation time still grows with the chain (10 → 13 steps)" in reason
    assert chain_lengths([ensemble(0)], [[(1000, 10.0), (2000, 12.0)]]) == []


def test_short_chain_fails():
    # 200 draws at tau = 6 are 33 autocorrelation times; their number is ample otherwise.
    easy = replace(SETTINGS, target_ess=500, max_rhat=1.05)
    chains = [correlated(i, 6.0) for i in (2, 3)]
    results = [ensemble(i, chain, importance=bare(chain)) for i, chain in enumerate(chains)]
    reasons = reasons_of(*results, settings=easy)
    assert len(reasons) == 2
    assert all("autocorrelation times long, at least 50 are needed" in r for r in reasons)


def bare(chain) -> Importance:
    """Weights that agree with a chain whatever its noise."""
    return weights(mean=chain.mean((0, 1)), sd=chain.std((0, 1)))


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"pareto_k": 0.8}, "Pareto k of the importance weights is 0.80, allowed 0.7"),
        ({"pareto_k": np.nan}, "Pareto k of the importance weights is nan, allowed 0.7"),
        ({"efficiency": 5e-4}, "efficiency of the importance weights is 0.05%, at least 0.1%"),
    ],
)
def test_bad_weights_fail(change, text):
    (reason,) = reasons_of(ensemble(0), ensemble(1, importance=weights(**change)))
    assert "the evidence is not trustworthy" in reason
    assert text in reason


def test_evidences_that_differ_fail():
    (reason,) = reasons_of(ensemble(0), ensemble(1, importance=weights(ln_z=-4.8)))
    # 0.2 / (0.01 sqrt 2)
    assert reason == "the ensembles' evidences disagree: ln Z differs by 0.20, 14.1 times its error"


def test_difference_of_evidences_that_does_not_matter_passes():
    close = [ensemble(i, importance=weights(ln_z=-5.0 + 0.01 * i, error=1e-4)) for i in (0, 1)]
    assert reasons_of(*close) == []


def test_chains_that_agree_but_not_with_the_weights_fail():
    # Both ensembles sample the same wrong posterior: R-hat and means see nothing.
    narrow = [ensemble(i, 0.7 * ensemble(i).chain) for i in (0, 1)]
    reasons = reasons_of(*narrow)
    assert len(reasons) == 2
    assert all("its own importance weights disagree: widths of" in r for r in reasons)


def test_weights_that_are_bad_are_no_judge_of_the_chain():
    narrow = [
        ensemble(i, 0.7 * ensemble(i).chain, importance=weights(pareto_k=0.9)) for i in (0, 1)
    ]
    (reason,) = reasons_of(*narrow)
    assert "Pareto k" in reason


def test_single_ensemble_is_judged_with_a_note():
    easy = replace(SETTINGS, ensembles=1)
    report = assess([ensemble(0)], easy, NAMES)
    assert report.converged
    assert report.notes == ("one ensemble only: independent starts were not compared",)
    drifting = ensemble(0).chain + np.linspace(-0.5, 0.5, N_STORED)[:, None, None]
    reasons = assess([ensemble(0, drifting)], easy, NAMES).reasons
    assert reasons[0].startswith("R-hat is not below 1.01 in 3 of 3 parameters")


def test_report_is_plain_json_without_nan():
    bad = weights(pareto_k=np.nan, ln_z=-np.inf, error=np.inf)
    report = assess([ensemble(0), ensemble(1, importance=bad)], SETTINGS, NAMES).as_dict()
    again = json.loads(json.dumps(report, allow_nan=False))
    assert again == report
    assert again["converged"] is False
    assert again["evidence"]["ln_z"] is None
    assert [p["name"] for p in again["parameters"]] == list(NAMES)
    assert set(again["parameters"][0]) == {"name", "rhat", "ess_bulk", "ess_tail"}
    assert again["acceptance"] == {"stretch": 0.3, "independence": 0.5}
    assert [e["ensemble"] for e in again["autocorrelation"]] == [0, 1]


def test_alignment_spreads_the_draws_of_the_longer_ensemble():
    short, long = ensemble(0, ensemble(0).chain[:67]), ensemble(1)
    both = aligned([short, long])
    assert both.shape == (2, 67, N_WALKERS, N_DIM)
    np.testing.assert_array_equal(both[0], short.chain)
    np.testing.assert_array_equal(both[1, [0, 33, -1]], long.chain[[0, 100, 199]])


def test_chains_are_time_halves_of_walker_groups():
    x = np.arange(16.0).reshape(4, 4)  # rows are draws, columns walkers
    chains = as_chains(x, 2)
    assert [sorted(c) for c in chains] == [
        [0, 1, 4, 5],
        [2, 3, 6, 7],
        [8, 9, 12, 13],
        [10, 11, 14, 15],
    ]


def test_rhat_is_arviz_own_for_whole_ensembles():
    from arviz_stats.base import array_stats

    # arviz-stats splits each chain in two; one walker alone leaves nothing to group.
    x = (
        np.random.default_rng(44).standard_t(3, size=(4, 100, 1))
        + np.arange(4)[:, None, None] * 0.1
    )
    expected = float(array_stats.rhat(x[:, :, 0], method="rank"))
    assert_allclose(split_rhat(list(x)), expected, rtol=1e-12)


def test_effective_sizes_are_arviz_own():
    from arviz_stats.base import array_stats

    x = correlated(0, 5.0)[:, :, 0]
    bulk = float(array_stats.ess(x.T, method="bulk"))
    tail = float(array_stats.ess(x.T, method="tail", prob=(0.05, 0.95)))
    assert_allclose(effective_sizes(x), (bulk, tail), rtol=1e-12)


def test_rank_scores_are_normal_whatever_the_distribution():
    z = rank_normalise(np.random.default_rng(45).lognormal(sigma=3.0, size=(50, 40)))
    # Scores of 2000 evenly spaced ranks: mean 0, variance short of 1 by the cut tails.
    assert_allclose([z.mean(), z.std()], [0.0, 1.0], atol=2e-3)


def test_autocorrelation_time_of_an_autoregression():
    # Integrated time (1 + rho) / (1 - rho) = 6. The estimate's relative error is
    # sqrt(2 (2 M + 1) / n) with the window M = 5 tau and n = 200 x 32 draws: 14%; the window cuts
    # e^-5 of the sum. Three parameters, three standard errors.
    tau = autocorrelation_times(correlated(0, 6.0))
    assert_allclose(tau, 6.0, rtol=3 * 0.14)
    assert_allclose(tau.mean(), 6.0, rtol=3 * 0.14 / np.sqrt(3.0))


def test_autocorrelation_time_that_never_settles_is_long():
    # All walkers alike and on a straight line: the sum of autocorrelations has no window.
    line = np.repeat(np.linspace(0.0, 1.0, N_STORED)[:, None, None], N_WALKERS, axis=1)
    walk = np.cumsum(np.random.default_rng(46).normal(size=(N_STORED, N_WALKERS, 1)), axis=0)
    assert autocorrelation_times(line)[0] > N_STORED / 10
    assert autocorrelation_times(walk)[0] > N_STORED / 10


def test_immobile_chain_has_no_finite_diagnostics():
    still = np.ones((20, 8, 1))
    assert autocorrelation_times(still)[0] == np.inf
    assert effective_sizes(still[:, :, 0]) == (0.0, 0.0)
    assert split_rhat([still[:, :, 0]]) == np.inf


def test_growth_is_in_steps_for_ever_longer_starts():
    table = growth(correlated(0, 3.0), thin=5)
    assert [n for n, _ in table] == [60, 125, 250, 500, 1000]
    assert_allclose(table[-1][1], 15.0, rtol=0.3)
