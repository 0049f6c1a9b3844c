"""Whole runs, prior to verdict: known posteriors are recovered, wrong samplers refused."""

from dataclasses import replace

import numpy as np
import pytest
from known_posteriors import Linear, Shell, settings
from numpy.testing import assert_allclose

from fogline.convergence import assess
from fogline.diagnostics import effective_sizes
from fogline.ensemble import run_ensemble
from fogline.moves import IndependenceMove

ERRORS = 4.5
"""Standard errors allowed: about one failure in 10^5 for each number that is compared."""


def run(posterior, log_probs=None, **changes):
    chosen = settings(**changes)
    log_probs = log_probs or [posterior.ln_prob] * chosen.ensembles
    results = [run_ensemble(f, posterior.n_dim, chosen, i) for i, f in enumerate(log_probs)]
    names = [f"x{k}" for k in range(posterior.n_dim)]
    return results, assess(results, chosen, names)


@pytest.fixture(scope="module")
def linear():
    return run(Linear())


@pytest.fixture(scope="module")
def shell():
    return run(Shell())


@pytest.mark.parametrize("name", ["linear", "shell"])
def test_known_posterior_converges(name, request):
    results, report = request.getfixturevalue(name)
    assert report.reasons == ()
    # Each ensemble stopped by itself, well before the limit, for the reason it states.
    assert all(r.stopped and r.steps < 10_000 for r in results)
    assert all(r.reason.startswith("target met after") for r in results)
    assert min(min(p.ess_bulk, p.ess_tail) for p in report.parameters) >= 4000
    assert all(len(r.chain) * r.thin == r.steps for r in results)


def assert_moments(results, k, mean, width):
    x = np.concatenate([r.chain[:, :, k] for r in results if len(r.chain)], axis=0)
    sizes = [effective_sizes(r.chain[:, :, k])[0] for r in results]
    # Standard errors of a mean and, for a kurtosis of up to 5, of a width: sqrt((5 - 1) / 4 n).
    assert_allclose(x.mean(), mean, atol=ERRORS * width / np.sqrt(sum(sizes)))
    assert_allclose(x.std(), width, rtol=ERRORS / np.sqrt(sum(sizes)))


def test_linear_posterior_has_its_closed_form_moments(linear):
    for k, (mean, width) in enumerate(zip(*Linear().moments, strict=True)):
        assert_moments(linear[0], k, mean, width)


def test_shell_has_its_quadrature_moments(shell):
    _, mean, width = Shell().quadrature()
    for k in range(3):  # the three coordinates are interchangeable
        assert_moments(shell[0], k, mean, width)


def test_shells_constraint_has_its_own_distribution(shell):
    # Nearly its likelihood's own: the prior's slope across it is mild.
    u = np.concatenate([np.log(np.exp(r.samples).sum(axis=1)) for r in shell[0]])
    assert_allclose(u.std(), Shell().sigma, rtol=0.05)


def test_ensembles_differ_and_repeat(linear):
    results, _ = linear
    assert not np.array_equal(results[0].chain[:10], results[1].chain[:10])
    again = run_ensemble(Linear().ln_prob, 4, settings(), 1)
    np.testing.assert_array_equal(again.chain, results[1].chain)
    assert again.importance.ln_z == results[1].importance.ln_z


def test_stored_ln_posterior_belongs_to_the_stored_draws(shell):
    for result in shell[0]:
        expected = Shell().ln_prob(result.samples).reshape(result.ln_prob.shape)
        assert_allclose(result.ln_prob, expected, rtol=1e-9, atol=1e-9)


def test_sampler_without_hastings_ratio_is_refused(monkeypatch):
    # Both ensembles sample the same wrong posterior: R-hat, means and evidences all agree.
    def no_ratio(self, ln_q, ln_q_proposed):
        return np.zeros_like(ln_q)

    monkeypatch.setattr(IndependenceMove, "_ln_hastings", no_ratio)
    _, report = run(Linear())
    assert not report.converged
    assert any("its own importance weights disagree: widths" in r for r in report.reasons)


def test_ensembles_of_different_posteriors_are_refused():
    other = Linear()
    other.y = other.y + 0.5 * np.array([0.05, 0.1, 0.3, 0.3, 1.0, 1.0])
    _, report = run(Linear(), [Linear().ln_prob, other.ln_prob])
    assert not report.converged
    assert any("ensemble 0 and ensemble 1 disagree: means of" in r for r in report.reasons)


def test_planted_stuck_walker_is_refused(linear):
    results, _ = linear
    chain, ln_prob = results[1].chain.copy(), results[1].ln_prob.copy()
    chain[:, 11], ln_prob[:, 11] = 4.0, Linear().ln_prob(np.full((1, 4), 4.0))
    sick = [results[0], replace(results[1], chain=chain, ln_prob=ln_prob)]
    report = assess(sick, settings(), ["a", "b", "c", "d"])
    stuck = [r for r in report.reasons if "of 64 walkers" in r]
    assert [r.startswith("ensemble 1: 1 of 64 walkers") for r in stuck] == [True] * 3


def test_modes_that_walkers_cannot_leave_are_refused():
    # Stretch moves alone, two far islands of equal weight: each walker keeps to its own.
    class Islands:
        n_dim = 2

        def ln_prob(self, x):
            distance = np.minimum(((x - 2.0) ** 2).sum(axis=1), ((x + 2.0) ** 2).sum(axis=1))
            return -0.5 * distance / 0.01**2

    _, report = run(
        Islands(), warm_up=(40,), components=(1,), independence_share=0.0, max_steps=1000
    )
    assert not report.converged


def test_step_limit_is_said_in_words():
    results, report = run(Linear(), max_steps=60)
    assert [r.steps for r in results] == [60, 60]
    assert any("step limit of 60 reached" in reason for reason in report.reasons)


def test_single_ensemble_works():
    _, report = run(Linear(), ensembles=1)
    assert report.converged
    assert report.notes == ("one ensemble only: independent starts were not compared",)


def test_start_where_the_posterior_vanishes_is_drawn_again():
    # A third of the prior has no posterior at all.
    class Cut:
        n_dim = 2

        def ln_prob(self, x):
            inside = x[:, 0] > -0.43
            return np.where(inside, -0.5 * (x**2).sum(axis=1), -np.inf)

    results, report = run(Cut(), target_ess=1000)
    assert report.converged
    assert all(np.isfinite(r.ln_prob).all() for r in results)
    assert results[0].samples[:, 0].min() > -0.43


def test_nan_is_reported_with_its_parameters():
    def bad(x):
        return np.full(len(x), np.nan)

    with pytest.raises(ValueError, match=r"the posterior is NaN at x = \[.*, .*\]"):
        run_ensemble(bad, 2, settings(), 0)


def test_posterior_without_support_is_reported():
    with pytest.raises(ValueError, match="no draw from the prior has a finite posterior"):
        run_ensemble(lambda x: np.full(len(x), -np.inf), 2, settings(), 0)


def test_too_few_walkers_are_refused():
    with pytest.raises(ValueError, match="40 parameters need 80 walkers or more"):
        run_ensemble(lambda x: x[:, 0], 40, settings(), 0)


def test_warm_up_goes_on_only_where_the_mixture_is_poor():
    easy, _ = run(Linear(), ensembles=1)
    assert easy[0].warm_up == 500  # as the settings ask
    # One component on a shell: proposals are mostly refused, and two more rounds are made.
    hard, _ = run(Shell(), ensembles=1, warm_up=(200, 100), components=(1, 1), max_steps=100)
    assert hard[0].acceptance["independence"] < 0.45
    assert hard[0].warm_up == 200 + 100 + 200 + 300


def test_long_chain_is_thinned_to_fit_its_file(monkeypatch):
    monkeypatch.setattr("fogline.blocks.MAX_CHAIN_BYTES", 64 * 5 * 8 * 200.0)
    results, _ = run(Linear(), ensembles=1, target_ess=10**9, max_steps=2000)
    (result,) = results
    # 1000 draws at thin = 2 do not fit into 200: thinned to 4, then 8, ...
    assert len(result.chain) <= 200
    assert result.thin in (16, 32)
    assert len(result.chain) * result.thin == result.steps
