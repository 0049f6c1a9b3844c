"""Weights of models and what they say together, against brute force and closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from fogline.figures.family import draw_family
from fogline.trust.families import Member, combined_table, weights_table
from fogline.trust.leave_one_out import LeaveOneOut
from fogline.trust.stacking import combine, evidence_weights, stacking_weights


def score(ln_p, weight):
    return np.log(np.exp(ln_p) @ weight).sum()


def test_two_models_against_a_grid():
    rng = np.random.default_rng(1)
    ln_p = rng.normal(-1.0, 1.0, (40, 2))
    grid = np.linspace(0.0, 1.0, 20_001)
    best = grid[np.argmax([score(ln_p, np.array([w, 1.0 - w])) for w in grid])]
    assert stacking_weights(ln_p)[0] == pytest.approx(best, abs=2e-4)


def test_three_models_against_a_grid():
    rng = np.random.default_rng(2)
    ln_p = rng.normal(-1.0, 1.0, (60, 3))
    found = stacking_weights(ln_p)
    assert found.sum() == pytest.approx(1.0)
    steps = np.linspace(0.0, 1.0, 101)
    grid = [(a, b, 1.0 - a - b) for a in steps for b in steps if a + b <= 1.0]
    best = max(score(ln_p, np.array(w)) for w in grid)
    assert score(ln_p, found) >= best - 1e-9


def test_a_right_and_a_wrong_model():
    y = np.random.default_rng(3).standard_normal(300)
    right, wrong = stats.norm.logpdf(y), stats.norm.logpdf(y, 1.5, 1.0)
    weight = stacking_weights(np.stack([wrong, right], axis=1))
    assert weight[1] > 0.97
    same = stacking_weights(np.stack([right, right], axis=1))
    assert_allclose(same, 0.5)


def test_a_mixture_is_found_where_neither_is_right():
    """A third of the data is from one model, the rest from the other: weights 1/3 and 2/3."""
    rng = np.random.default_rng(4)
    y = np.concatenate([rng.normal(-3.0, 1.0, 400), rng.normal(3.0, 1.0, 800)])
    ln_p = np.stack([stats.norm.logpdf(y, -3.0), stats.norm.logpdf(y, 3.0)], axis=1)
    assert_allclose(stacking_weights(ln_p), [1.0 / 3.0, 2.0 / 3.0], atol=5e-3)


def test_evidence_weights_in_closed_form():
    rng = np.random.default_rng(5)
    weight, lo, hi = evidence_weights(np.array([-10.0, -10.0 - np.log(3.0)]), np.zeros(2), rng)
    assert_allclose(weight, [0.75, 0.25])
    assert_allclose([lo, hi], [weight, weight])
    weight, lo, hi = evidence_weights(np.array([-900.0, -900.0]), np.full(2, 0.5), rng)
    assert_allclose(weight, 0.5)
    # ln of the ratio has a scatter of 0.5 √2.
    assert hi[0] == pytest.approx(1.0 / (1.0 + np.exp(-0.5 * np.sqrt(2.0) * 0.9945)), abs=0.02)


def test_mixture_of_normals_in_closed_form():
    rng = np.random.default_rng(6)
    values = [rng.normal(0.0, 1.0, 40_000), rng.normal(4.0, 1.0, 20_000)]
    found = combine(values, np.array([0.25, 0.75]))
    between = 0.25 * 0.75 * 16.0
    assert found.choice_share == pytest.approx(between / (between + 1.0), abs=0.01)

    def cdf(x):
        return 0.25 * stats.norm.cdf(x) + 0.75 * stats.norm.cdf(x, 4.0)

    assert_allclose(cdf(found.bands), [0.5, 0.16, 0.84, 0.025, 0.975], atol=5e-3)
    assert combine([values[0], values[0]], np.array([0.5, 0.5])).choice_share < 1e-12
    alone = combine([values[0], np.full(10, np.inf)], np.array([1.0, 0.0]))
    assert np.isfinite(alone.bands).all()
    assert alone.choice_share == 0.0
    beyond = combine([values[0], np.full(10, np.inf)], np.array([0.5, 0.5]))
    assert beyond.bands[4] == np.inf
    assert np.isnan(beyond.choice_share)


def member(name, shift, ln_p, rng):
    rows = len(ln_p)
    loo = LeaveOneOut(np.full(rows, 0.5), np.ones(rows), np.array([0.9, *np.zeros(rows - 1)]), ln_p)
    values = shift + rng.standard_normal((500, 4))
    return Member(name, loo, -10.0 - shift, 0.1, values)


def test_tables_and_figure():
    rng = np.random.default_rng(7)
    ln_p = rng.normal(-1.0, 0.3, 30)
    members = [member("near", 0.0, ln_p, rng), member("far", 2.0, ln_p - 0.2, rng)]
    weights = weights_table(members)
    assert list(weights["analysis"]) == ["near", "far"]
    assert_allclose(weights["elpd_difference"], [0.0, -6.0])
    assert_allclose(weights["elpd_difference_error"], 0.0, atol=1e-9)
    assert list(weights["n_bad_weights"]) == [1, 1]
    assert weights["weight_stacking"][0] > 0.999
    assert weights["weight_evidence"][0] == pytest.approx(1.0 / (1.0 + np.exp(-2.0)), rel=1e-6)
    keys = [("tau_eff", 2.5), ("rho_hi", 2.5), ("log_f(12)", 2.5), ("log_f(15)", 2.5)]
    combined = combined_table(members, keys, np.array([0.5, 0.5]), weights)
    # Two unit normals two apart: half of the variance is between them.
    assert_allclose(combined["stacked_choice_share"], 0.5, atol=0.06)
    assert_allclose(combined["far_median"] - combined["near_median"], 2.0, atol=0.3)
    figure = draw_family(combined, weights)
    assert [label.get_text() for label in figure.axes[1].get_yticklabels()] == [
        r"$\tau_\mathrm{eff}$, $z = 2.5$",
        r"$\rho_\mathrm{HI}$, $z = 2.5$",
    ]
