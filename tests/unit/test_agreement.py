"""Whether samplers are told to agree when they do, and to disagree when they don't."""

from __future__ import annotations

import sys

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fogline.faults import InputError
from fogline.figures.agreement import draw_agreement
from fogline.trust.agreement import QUANTILES, Sample, agreement_table, compare_runs
from fogline.trust.nested import nested

NAMES = ("log_f[12.0]", "rho_hi@2.5", "evolution[14.0]")


def sample(rng, shift=0.0, scale=1.0, ln_z=-10.0, n_blocks=8, n=500):
    """Draws of a unit normal, moved and stretched in the second quantity."""
    blocks = []
    for _ in range(n_blocks):
        x = rng.standard_normal((n, 3))
        x[:, 1] = shift + scale * x[:, 1]
        blocks.append(x)
    return Sample(tuple(blocks), ln_z, 0.05)


def test_quantiles_and_their_errors():
    rng = np.random.default_rng(1)
    found = np.array([sample(rng).quantiles() for _ in range(60)])
    values, errors = found[:, 0], found[:, 1]
    assert_allclose(values.mean(axis=0)[2], 0.0, atol=0.02)
    # The stated error is the scatter from one sample to the next.
    assert_allclose(errors.mean(axis=0), values.std(axis=0), rtol=0.35)


def test_samples_of_one_distribution_agree():
    rng = np.random.default_rng(2)
    verdicts = [compare_runs(sample(rng), sample(rng), NAMES) for _ in range(60)]
    assert sum(not verdict.agree for verdict in verdicts) <= 3  # 1% is stated


@pytest.mark.parametrize(
    ("changes", "quantity"),
    [({"shift": 0.3}, "rho_hi@2.5"), ({"scale": 1.3}, "rho_hi@2.5"), ({"ln_z": -8.0}, "")],
)
def test_what_differs_is_found(changes, quantity):
    rng = np.random.default_rng(3)
    verdict = compare_runs(sample(rng), sample(rng, **changes), NAMES)
    assert not verdict.agree
    if quantity:
        assert verdict.quantity == quantity
    else:
        assert verdict.ln_z == pytest.approx(2.0 / np.hypot(0.05, 0.05))


def test_table_compares_with_the_ensembles_and_says_who_may_judge():
    rng = np.random.default_rng(4)
    runs = {
        "ensembles": [sample(rng)],
        "tempered": [sample(rng)],
        "nested": [sample(rng, shift=0.6), sample(rng, shift=-0.6)],
    }
    table = agreement_table(runs, NAMES)
    assert len(table) == 4 * (len(QUANTILES) * len(NAMES) + 1)
    own = table[table["sampler"] == "ensembles"]
    assert_allclose(own["difference_errors"], 0.0)
    first = table[(table["sampler"] == "nested") & (table["run"] == 0)]
    median = first[(first["quantity"] == "rho_hi@2.5") & (first["quantile"] == 0.5)]
    assert median["difference_sigma"][0] == pytest.approx(0.6, abs=0.1)  # nested minus ensembles
    assert not first["usable"].any()
    assert table[table["sampler"] == "tempered"]["usable"].all()
    words = table.meta["verdicts"]
    assert words[0].startswith("tempered agrees with ensembles")
    assert "judges nothing" in words[1]
    wrong = agreement_table({**runs, "tempered": [sample(rng, shift=0.6)]}, NAMES)
    assert wrong.meta["verdicts"][0].startswith("tempered DISAGREES with ensembles: worst rho_hi")
    figure = draw_agreement(table)
    assert [axes.get_title() for axes in figure.axes] == ["16% quantile", "median", "84% quantile"]


def test_nested_sampler_in_closed_form():
    """Unit normal prior, likelihood N(1, 0.5²) in two dimensions."""
    pytest.importorskip("dynesty", reason="the nested sampler is an optional extra")
    from scipy import stats

    def ln_likelihood(x):
        return stats.norm.logpdf(1.0, x, 0.5).sum(axis=1)

    found = nested(ln_likelihood, 2, np.random.default_rng(5))
    ln_z = 2.0 * stats.norm.logpdf(1.0, 0.0, np.hypot(1.0, 0.5))
    assert found.ln_z == pytest.approx(ln_z, abs=5.0 * found.error)
    assert_allclose(found.x.mean(axis=0), 0.8, atol=0.1)


def test_missing_library_is_a_fault_with_the_remedy(monkeypatch):
    monkeypatch.setitem(sys.modules, "dynesty", None)
    with pytest.raises(InputError, match=r"pip install -e '\.\[nested\]'"):
        nested(lambda x: np.zeros(len(x)), 2, np.random.default_rng(0))
