"""Ranks of simulated truths: false alarms at the stated rate, planted failures found and named."""

import numpy as np
import pytest
from matplotlib.figure import Figure
from numpy.testing import assert_allclose
from scipy import stats

from fogline.figures.calibration import MOST_PANELS, draw_calibration
from fogline.trust.ranks import (
    counts_below,
    coverage,
    failure,
    moments,
    rank_table,
    uniform_band,
    uniformity,
)

N, L = 200, 99
NAMES = tuple("abcdef")


def ranks_of(rng, n=N, n_draws=L, width=1.0, shift=0.0):
    """Return ranks where posteriors are `width` times as wide as right and `shift` σ too high."""
    truth = rng.standard_normal(n)
    # With a flat prior the posterior of data y = truth + noise is N(y, 1).
    centre = truth + rng.standard_normal(n) + shift
    draws = centre[:, None] + width * rng.standard_normal((n, n_draws))
    return (draws < truth[:, None]).sum(axis=1)


def table_of(column, seed=1, names=NAMES):
    """Return the table of one column of ranks beside uniform ones."""
    rng = np.random.default_rng(seed)
    others = [rng.integers(0, L + 1, len(column)) for _ in names[1:]]
    return rank_table(np.stack([column, *others], axis=1), L, names)


@pytest.mark.parametrize(("n", "n_draws"), [(100, 15), (150, 400)])
def test_uniform_ranks_are_flagged_at_the_stated_rate(n, n_draws):
    rng = np.random.default_rng(11)
    alpha, n_tables = 0.1, 300
    flagged = pointwise = 0
    at = uniform_band(n, n_draws, alpha, 5).at
    for _ in range(n_tables):
        ranks = rng.integers(0, n_draws + 1, (n, 5))
        flagged += bool(uniformity(ranks, n_draws, alpha)[1].any())
        ends = stats.binom.ppf([[0.5 * alpha / 5], [1.0 - 0.5 * alpha / 5]], n, at)
        counts = counts_below(ranks, n_draws)
        pointwise += bool(((counts < ends[0]) | (counts > ends[1])).any())
    lo, hi = stats.binom.ppf([0.001, 0.999], n_tables, alpha)
    assert lo <= flagged <= hi
    assert pointwise > hi  # the control: intervals that are not adjusted


@pytest.mark.parametrize("alpha", [0.05, 0.005])
def test_band_holds_the_whole_curve_with_its_exact_probability(alpha):
    """By the binomial steps of the curve from each point to the next, without simulation."""
    n, n_draws = 60, 20
    band = uniform_band(n, n_draws, alpha)
    lo, hi = np.rint(band.lo * n).astype(int), np.rint(band.hi * n).astype(int)
    count = np.arange(n + 1)
    chance, before = np.zeros(n + 1), 0.0
    chance[0] = 1.0
    for at, least, most in zip(band.at, lo, hi, strict=True):
        share = (at - before) / (1.0 - before)
        step = stats.binom.pmf(count[None] - count[:, None], n - count[:, None], share)
        chance = chance @ step
        chance[(count < least) | (count > most)] = 0.0
        before = at
    # Tails of counts are discrete: of α itself a part is left over. γ is simulated to 7%.
    assert 0.5 * alpha < 1.0 - chance.sum() < 1.2 * alpha


FAILURES = [
    ({"width": 0.5}, "intervals too narrow"),
    ({"width": 2.0}, "intervals too wide"),
    ({"shift": 0.5}, "biased high"),
    ({"shift": -0.5}, "biased low"),
    ({"width": 0.5, "shift": 0.5}, "intervals too narrow, biased high"),
]


@pytest.mark.parametrize(("wrong", "words"), FAILURES)
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_planted_failures_are_flagged_and_named(wrong, words, seed):
    table = table_of(ranks_of(np.random.default_rng(seed), **wrong), seed)
    assert table["flag"][0] == words
    assert table["p_chi_square"][0] < 1e-3
    assert table["p_uniform"][0] < table.meta["alpha_of_each"]


def test_calibrated_posteriors_are_not_flagged():
    table = table_of(ranks_of(np.random.default_rng(5)))
    assert list(table["flag"]) == [""] * len(NAMES)
    assert abs(table["shift"][0]) < 4.0 / np.sqrt(N)
    assert abs(table["width"][0] - 1.0) < 4.0 / np.sqrt(2.0 * N)


def test_shift_and_width_are_those_that_were_planted():
    rng = np.random.default_rng(6)
    n, n_draws = 20_000, 499
    columns = [ranks_of(rng, n, n_draws, **w) for w in ({"shift": 0.3}, {"width": 1.5})]
    shift, width, z_shift, z_width = moments(np.stack(columns, axis=1), n_draws)
    # Standard errors 0.007 and 0.005; scores are cut off at 3.1 σ.
    assert_allclose(shift, [0.3, 0.0], atol=0.04)
    assert_allclose(width, [1.0, 1.0 / 1.5], atol=0.04)
    assert z_shift[0] > 30.0
    assert z_width[1] < -30.0


def test_moments_of_uniform_ranks_are_standard():
    rng = np.random.default_rng(7)
    z = np.array([moments(rng.integers(0, 32, (100, 1)), 31)[2:] for _ in range(2000)])[:, :, 0]
    # Standard error of a standard deviation of 2000: 0.016.
    assert_allclose(z.std(axis=0), 1.0, atol=0.07)
    assert_allclose(z.mean(axis=0), 0.0, atol=0.15)  # -z²/n of the own mean: -0.1


def test_small_deviations_have_no_names_beside_large_ones():
    assert failure(0.1, 40.0) == "intervals too narrow"
    assert failure(5.0, 40.0) == "intervals too narrow"
    assert failure(-20.0, -40.0) == "intervals too wide, biased low"
    assert failure(0.5, 0.5) == "ranks not uniform"


def test_coverage_counts_truths_in_central_intervals():
    ranks = np.arange(100)[:, None]  # each rank once
    covered = coverage(ranks, L)
    for level, share in ((50, 0.5), (68, 0.68), (90, 0.9), (95, 0.94)):
        assert covered[f"covered_{level}"][0] == pytest.approx(share)
    exact = stats.binomtest(68, 100).proportion_ci(0.95, "exact")
    assert covered["covered_68_lo"][0] == pytest.approx(exact.low, rel=1e-9)
    assert covered["covered_68_hi"][0] == pytest.approx(exact.high, rel=1e-9)
    every = coverage(np.full((20, 1), 50), L)
    assert every["covered_50_hi"][0] == 1.0
    assert every["covered_50_lo"][0] == pytest.approx(0.025 ** (1 / 20))
    none = coverage(np.zeros((20, 1), dtype=int), L)
    assert (none["covered_95"][0], none["covered_95_lo"][0]) == (0.0, 0.0)


def test_coverage_of_halved_widths_is_that_of_half_the_interval():
    ranks = ranks_of(np.random.default_rng(8), n=5000, width=0.5)
    table = rank_table(ranks[:, None], L, ["a"])
    within = 2.0 * stats.norm.cdf(0.5 * stats.norm.ppf(0.84)) - 1.0
    assert table["covered_68_lo"][0] < within + 0.01
    assert table["covered_68_hi"][0] > within - 0.01
    assert table["covered_68_hi"][0] < 0.68


def test_table_says_what_it_is_and_is_the_same_twice():
    column = ranks_of(np.random.default_rng(9))
    table, again = table_of(column), table_of(column)
    assert "200 replicates" in table.meta["definition"]
    assert table.meta["interval_share"]["50"] == pytest.approx(0.5)
    assert all((table[name] == again[name]).all() for name in table.colnames)


BAD = [
    (np.zeros((5, 2), dtype=int), r"shape \(5, 2\), must be \(n_replicates, 1\)"),
    (np.zeros((5, 1)), "type float64, must be whole numbers"),
    (np.full((5, 1), 100), "run from 100 to 100, must lie in 0 to 99"),
    (np.zeros((0, 1), dtype=int), r"shape \(0, 1\)"),
]


@pytest.mark.parametrize(("ranks", "words"), BAD)
def test_what_is_no_rank_is_refused(ranks, words):
    with pytest.raises(ValueError, match=words):
        rank_table(ranks, L, ["a"])


# Figure


def drawn_lines(figure, gid):
    return [line for axes in figure.axes for line in axes.lines if line.get_gid() == gid]


def test_figure_is_red_only_where_the_curve_leaves_the_band():
    rng = np.random.default_rng(10)
    ranks = np.stack([rng.integers(0, L + 1, N), ranks_of(rng, shift=0.5)], axis=1)
    figure = draw_calibration(ranks, L, ["fine", "high"])
    assert isinstance(figure, Figure)
    assert [axes.get_title() for axes in figure.axes] == ["high", "fine"]  # worst first
    (red,) = drawn_lines(figure, "outside")
    band = uniform_band(N, L, 0.05, 2)
    x, y = (np.asarray(values, float) for values in red.get_data())
    hi = np.interp(x, [0.0, *band.at, 1.0], [0.0, *(band.hi - band.at), 0.0])
    shown = np.isfinite(y)
    assert 0 < shown.sum() < len(y)
    # Posteriors above the truth give too many low ranks: above the band.
    assert (y[shown] > hi[shown]).all()
    assert [t.get_text() for t in figure.axes[0].texts] == ["biased high"]
    assert not figure.axes[1].texts


def test_figure_has_at_most_so_many_panels_and_none_empty():
    rng = np.random.default_rng(12)
    for n_quantities, n_panels in ((30, MOST_PANELS), (7, 7), (1, 1)):
        names = [f"log_f[{k}]" for k in range(n_quantities)]
        figure = draw_calibration(rng.integers(0, L + 1, (N, n_quantities)), L, names)
        assert len(figure.axes) == n_panels
        assert len(drawn_lines(figure, "curve")) == n_panels
