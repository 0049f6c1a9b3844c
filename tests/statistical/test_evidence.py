"""Evidence against closed forms, quadrature, and a nested sampler where it agrees with itself."""

import numpy as np
import pytest
from dynesty import NestedSampler
from known_posteriors import Linear, Shell, ln_prior, settings
from numpy.testing import assert_allclose
from scipy.special import ndtri

from fogline.ensemble import run_ensemble
from fogline.evidence import Importance, combine_evidence, importance_sample, summarise
from fogline.mixture import StudentMixture

ERRORS = 4.0
"""Standard errors allowed: about one failure in 10^4 for each comparison."""


def evidence_of(posterior):
    chosen = settings()
    return combine_evidence(
        [run_ensemble(posterior.ln_prob, posterior.n_dim, chosen, i).importance for i in (0, 1)]
    )


@pytest.fixture(scope="module")
def shell():
    return evidence_of(Shell())


def test_linear_posterior_has_its_closed_form_evidence():
    evidence = evidence_of(Linear())
    assert evidence.error <= 0.05
    assert abs(evidence.ln_z - Linear().ln_z) < ERRORS * evidence.error
    assert evidence.disagreement < ERRORS


def test_shell_has_its_quadrature_evidence(shell):
    z, _, _ = Shell().quadrature()
    coarse, _, _ = Shell().quadrature(600)
    assert_allclose(z, coarse, rtol=1e-3)  # the quadrature is a hundred times finer than needed
    assert shell.error <= 0.05
    assert abs(shell.ln_z - np.log(z)) < ERRORS * shell.error + 1e-3


def nested(posterior: Shell, sample: str) -> tuple[float, float]:
    """Return ln Z and its error from dynesty, over the unit cube of the prior."""

    def ln_likelihood(x):
        return float((posterior.ln_prob(x[None]) - ln_prior(x[None]))[0])

    sampler = NestedSampler(
        ln_likelihood,
        ndtri,
        posterior.n_dim,
        nlive=400,
        sample=sample,
        bootstrap=0,
        rstate=np.random.default_rng(61),
    )
    sampler.run_nested(dlogz=0.1, print_progress=False)
    return float(sampler.results.logz[-1]), float(sampler.results.logzerr[-1])


@pytest.mark.slow
def test_nested_sampler_agrees_where_two_of_its_settings_do():
    wide = Shell(sigma=0.2)  # wide enough for a nested sampler
    ours = evidence_of(wide)
    (uniform, uniform_error), (slices, slices_error) = (nested(wide, s) for s in ("unif", "rslice"))
    # Only then is it a judge at all.
    assert abs(uniform - slices) < 3.0 * np.hypot(uniform_error, slices_error)
    for ln_z, error in ((uniform, uniform_error), (slices, slices_error)):
        assert abs(ours.ln_z - ln_z) < 3.0 * np.hypot(ours.error, error)


def unit_mixture(scale: float, n_dim: int = 2) -> StudentMixture:
    return StudentMixture(np.ones(1), np.zeros((1, n_dim)), scale * np.eye(n_dim)[None])


def test_perfect_proposal_has_no_error():
    mixture = unit_mixture(1.0)
    result = importance_sample(
        lambda x: mixture.ln_density(x) + 3.0, mixture, np.random.default_rng(62)
    )
    assert_allclose([result.ln_z, result.error, result.efficiency], [3.0, 0.0, 1.0], atol=1e-6)
    assert result.pareto_k == -np.inf


def ln_normal(x):
    return -0.5 * (x**2).sum(axis=1) - np.log(2.0 * np.pi)


def test_stated_error_is_the_scatter_of_repeats():
    streams = np.random.SeedSequence(63).spawn(60)
    results = [
        importance_sample(
            ln_normal, unit_mixture(1.6), np.random.default_rng(s), n_min=2048, n_max=2048
        )
        for s in streams
    ]
    pulls = np.array([r.ln_z / r.error for r in results])
    # 60 pulls: their mean square is 1 with standard error sqrt(2 / 60).
    assert abs((pulls**2).mean() - 1.0) < 4.0 * np.sqrt(2.0 / 60.0)
    # Mean and width of the posterior, with the errors stated for them: 2 x 60 pulls each.
    shifts = np.array([r.mean / r.mean_error for r in results])
    widths = np.array([np.log(r.sd) / r.sd_error for r in results])
    for p in (shifts, widths):
        assert abs((p**2).mean() - 1.0) < 4.0 * np.sqrt(2.0 / 120.0)


def test_narrow_proposal_is_found_out():
    # A tenth of the width: weights have a tail too heavy for their own error.
    result = importance_sample(ln_normal, unit_mixture(0.1, 6), np.random.default_rng(64))
    assert result.pareto_k > 0.7


def test_broad_proposal_has_a_light_tail():
    result = importance_sample(ln_normal, unit_mixture(1.3), np.random.default_rng(65))
    assert result.pareto_k < 0.3
    assert result.efficiency > 0.5


def test_result_depends_on_its_generator_alone():
    runs = [
        importance_sample(ln_normal, unit_mixture(1.3), np.random.default_rng(seed)).ln_z
        for seed in (66, 66, 67)
    ]
    assert runs[0] == runs[1] != runs[2]


def test_draws_without_posterior_count():
    # Half of a normal: the evidence is a half. 20 480 draws or more.
    result = importance_sample(
        lambda x: np.where(x[:, 0] > 0.0, ln_normal(x), -np.inf),
        unit_mixture(1.1),
        np.random.default_rng(68),
    )
    assert abs(result.ln_z - np.log(0.5)) < ERRORS * result.error


def test_nothing_is_claimed_where_no_draw_has_a_posterior():
    result = summarise(np.zeros((10, 2)), np.full(10, -np.inf))
    assert (result.ln_z, result.error, result.efficiency) == (-np.inf, np.inf, 0.0)
    assert combine_evidence([result]).error == np.inf


def entry(ln_z: float, error: float) -> Importance:
    one = np.ones(2)
    return Importance(ln_z, error, 0.2, 0.3, 1000, one, one, one, one)


def test_combination_weights_by_inverse_variance():
    evidence = combine_evidence([entry(1.0, 0.1), entry(2.0, 0.2)])
    assert_allclose(evidence.ln_z, (1.0 / 0.01 + 2.0 / 0.04) / (1.0 / 0.01 + 1.0 / 0.04))
    assert_allclose(evidence.error, (1.0 / 0.01 + 1.0 / 0.04) ** -0.5)
    assert_allclose(evidence.disagreement, 1.0 / np.hypot(0.1, 0.2))
    assert_allclose(evidence.difference, 1.0)


def test_combination_of_one_is_itself():
    evidence = combine_evidence([entry(1.0, 0.1)])
    assert_allclose([evidence.ln_z, evidence.error, evidence.disagreement], [1.0, 0.1, 0.0])
