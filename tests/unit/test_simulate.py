"""Replicated data: drawn from the densities that their likelihoods are."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from fogline.absorber_files import Listed, _rows_of
from fogline.absorbers.path import from_sightlines
from fogline.datasets import EXPOSURE, INTENSITY, SHOWN, hypothetical
from fogline.likelihood import Likelihood
from fogline.likelihood.base import RowData
from fogline.response import build_response
from fogline.response_file import Fit
from fogline.trust import simulate as simulate_module
from fogline.trust.simulate import simulate
from small_study import ANALYSIS, EDGES, SETTING, THETA, in_bins, measured

N = 3000
COVARIANCE = np.array([[1.0, 0.6], [0.6, 1.0]])


def lya(**meta):
    return hypothetical(
        "lya_opacity", [2.2, 3.0], form="tau", log_nhi_min=12.0, log_nhi_max=17.2, **meta
    )


def named(data, name, **changes):
    return dataclasses.replace(data, name=name, **changes)


def with_values(data, factor, lo, hi):
    """Return rows with values beside their predictions, and relative errors of each side."""
    value = build_response([data], SETTING).predict(THETA)
    return dataclasses.replace(
        data, observed=factor * value, err_lo=lo * factor * value, err_hi=hi * factor * value
    )


def ordinary():
    """Return rows of every kind but limits, with data 20% above their predictions."""
    normal = with_values(named(lya(), "normal"), 1.2, 0.10, 0.25)
    logged = with_values(named(lya(likelihood="lognormal"), "logged"), 1.2, 0.10, 0.25)
    joint = with_values(named(lya(likelihood="lognormal"), "joint"), 1.2, 0.2, 0.2)
    joint = dataclasses.replace(joint, covariance=COVARIANCE * np.outer(joint.err_lo, joint.err_lo))
    bins = hypothetical("column_distribution", [2.6] * 4, per="dX")
    counts = in_bins(
        bins, EDGES, name="counts", counts=True, search_path=np.full(4, 300.0),
        observed=np.array([4.0, 3.0, 0.0, 0.0]),
    )  # fmt: skip
    return [normal, logged, joint, counts]


def replicates(datasets, n, seed=1, theta=THETA):
    response = build_response(datasets, SETTING)
    rng = np.random.default_rng(seed)
    return [simulate(response, theta, rng, cosmology=SETTING.cosmology) for _ in range(n)]


def assert_mean(samples, expected, sigmas=4.0):
    """Assert that columns of samples, (n, k), have the expected means."""
    error = samples.std(axis=0) / np.sqrt(len(samples))
    assert (np.abs(samples.mean(axis=0) - expected) < sigmas * error).all()


def test_ordinary_data_have_mean_and_scatter_of_the_likelihood():
    datasets = ordinary()
    drawn = replicates(datasets, N)
    normal, logged, joint, counts = (
        np.array([sets[i].observed for sets in drawn]) for i in range(4)
    )
    predicted = build_response(datasets, SETTING).predict(THETA)
    for samples, m, (lo, hi) in (
        (normal, predicted[:2], (datasets[0].err_lo, datasets[0].err_hi)),
        (np.log(logged), np.log(predicted[2:4]), (0.10, 0.25)),
        (np.log(joint), np.log(predicted[4:6]), (0.2, 0.2)),
    ):
        # Half normals of hi below and lo above the prediction, with weights hi and lo.
        mean = m + np.sqrt(2.0 / np.pi) * (np.asarray(lo) - np.asarray(hi))
        assert_mean(samples, mean)
        assert_mean((samples - m) ** 2, np.asarray(lo) ** 2 - lo * np.asarray(hi) + hi**2)
    noise = (np.log(joint) - np.log(predicted[4:6])) / 0.2
    assert_mean(noise[:, :1] * noise[:, 1:], 0.6)
    assert_mean(counts, predicted[6:])
    assert_mean((counts - predicted[6:]) ** 2, predicted[6:])


def test_errors_stay_as_the_likelihood_has_them():
    datasets = ordinary()
    (drawn,) = replicates(datasets, 1, seed=2)
    before, after = RowData.from_datasets(datasets), RowData.from_datasets(drawn)
    for name in ("sigma_lo", "sigma_hi", "limit", "poisson", "log_normal"):
        assert_allclose(getattr(after, name), getattr(before, name), rtol=1e-12)
    assert_allclose(drawn[0].err_hi, datasets[0].err_hi)
    assert not np.allclose(drawn[1].err_hi, datasets[1].err_hi)
    covariances = [Likelihood.from_datasets(d).parts[-1].covariance for d in (datasets, drawn)]
    assert_allclose(covariances[1], covariances[0], rtol=1e-12)
    # The file's rule: a covariance has the errors on its diagonal.
    assert_allclose(np.sqrt(np.diag(drawn[2].covariance)), drawn[2].err_lo)
    for old, new in zip(datasets, drawn, strict=True):
        assert (new.observed != old.observed).any()
        assert new.meta == old.meta


def limits(sign, error=True, **meta):
    """Return two limits near their predictions."""
    data = with_values(named(lya(confidence=0.95, **meta), "limits"), 1.15, 0.2, 0.2)
    silent = np.full(2, np.nan)
    lo, hi = (data.err_lo, data.err_hi) if error else (silent, silent)
    return dataclasses.replace(data, limit=np.full(2, sign), err_lo=lo, err_hi=hi)


@pytest.mark.parametrize("sign", [1, -1])
@pytest.mark.parametrize("kind", ["plain", "bare", "lognormal"])
def test_limits_stay_where_the_likelihood_says_so(sign, kind):
    meta = {"likelihood": "lognormal"} if kind == "lognormal" else {}
    data = limits(sign, kind != "bare", **meta)
    drawn = [sets[0] for sets in replicates([data], N)]
    stays = np.array([d.limit == sign for d in drawn])
    rows = Likelihood.from_datasets([data]).rows
    predicted = build_response([data], SETTING).predict(THETA)
    m = np.log(predicted) if kind == "lognormal" else predicted
    chance = stats.norm.cdf(sign * (rows.observed - m) / rows.sigma_hi)
    # In 3000 draws: 4 standard errors of a share.
    error = np.sqrt(chance * (1.0 - chance) / N)
    assert (np.abs(stays.mean(axis=0) - chance) <= 4.0 * error).all()
    found = np.array([d.observed[0] for d in drawn if d.limit[0] == 0])
    found = np.log(found) if kind == "lognormal" else found
    start = (rows.observed[0] - m[0]) / rows.sigma_hi[0]
    ends = (start, np.inf) if sign > 0 else (-np.inf, start)
    cut = stats.truncnorm(*ends, m[0], rows.sigma_hi[0])
    assert stats.kstest(found, cut.cdf).pvalue > 1e-4
    for d in drawn[:20]:
        kept = d.limit == sign
        assert_allclose(d.observed[kept], data.observed[kept])
        assert_allclose(d.err_hi[kept], data.err_hi[kept])
        after = RowData.from_datasets([d])
        assert_allclose(after.sigma_hi, rows.sigma_hi)
        assert_allclose(after.sigma_lo, rows.sigma_hi)


def mean_ratio(datasets, other, n, *, seed=3, rebuilt=False, extras=None):
    """Return the mean of p(replicate | other) / p(replicate | θ), and its standard error.

    It is 1 if and only if replicates are drawn from what the likelihood is the density of.
    """
    response = build_response(datasets, SETTING)
    pair = np.stack([THETA, other])
    ratios = []
    for drawn in replicates(datasets, n, seed):
        if extras is not None:  # a model that is not the one that was drawn from
            drawn = [dataclasses.replace(d, extras={**d.extras, **extras}) for d in drawn]
        own = build_response(drawn, SETTING) if rebuilt else response
        ln_p = Likelihood.from_datasets(drawn).ln_total(own.predict(pair))
        ratios.append(np.exp(ln_p[1] - ln_p[0]))
    return np.mean(ratios), np.std(ratios) / np.sqrt(n)


def shifted(by):
    """Return parameters with all of f higher by so many dex."""
    theta = THETA.copy()
    theta[:10] += by
    return theta


def rows_with(kind):
    return {
        "ordinary": ordinary,
        "upper": lambda: [limits(1)],
        "lower": lambda: [limits(-1)],
        "logged": lambda: [limits(1, likelihood="lognormal")],
        "student": lambda: [
            *([limits(1, student_dof=5.0)]),
            named(ordinary()[0], "heavy", meta={**ordinary()[0].meta, "student_dof": 4.0}),
        ],
    }[kind]()


@pytest.mark.parametrize("kind", ["ordinary", "upper", "lower", "logged", "student"])
@pytest.mark.parametrize("by", [0.05, -0.05])
def test_replicates_have_the_density_of_the_likelihood(kind, by):
    mean, error = mean_ratio(rows_with(kind), shifted(by), 1500)
    assert abs(mean - 1.0) < 4.0 * error


def test_limits_that_are_drawn_anew_would_not_have_it():
    """The control: a limit of every measurement is no draw from the likelihood of limits."""
    data = limits(1)
    response = build_response([data], SETTING)
    rng = np.random.default_rng(4)
    pair = response.predict(np.stack([THETA, shifted(0.05)]))
    made = Likelihood.from_datasets([data]).replicate(pair[:1].repeat(1500, axis=0), rng)
    gap = data.observed - RowData.from_datasets([data]).observed
    ratios = []
    for y in made:
        again = dataclasses.replace(data, observed=y + gap)
        ln_p = Likelihood.from_datasets([again]).ln_total(pair)
        ratios.append(np.exp(ln_p[1] - ln_p[0]))
    assert abs(np.mean(ratios) - 1.0) > 8.0 * np.std(ratios) / np.sqrt(1500)


# Lists of absorbers


def a_list(n=60, bound=0, errors=(0.1, 0.25), n_sightlines=400, complete=True, **meta):
    """Return a list as its reader makes it; its absorbers do not follow the model."""
    rng = np.random.default_rng(5)
    meta = {"log_nhi_min": 20.3, "log_nhi_max": 21.9, **meta}
    lo = rng.uniform(*errors, n)
    listed = Listed(
        rng.uniform(2.2, 3.4, n), rng.uniform(20.3, 21.8, n), lo, 1.3 * lo, np.arange(n) < bound
    )
    start = rng.uniform(2.1, 2.8, n_sightlines)
    z, weight = from_sightlines(start, start + 0.7)
    extras = {"path_z": z, "path_weight": weight, "errors_lo": lo[:48], "errors_hi": 1.3 * lo[:48]}
    extras["n_absorbers"] = np.array(float(n))
    if complete:
        extras["completeness_log_nhi"] = np.array([19.0, 20.5, 21.5])
        extras["completeness"] = np.array([0.5, 0.9, 1.0])
    data = hypothetical("absorber_list", [3.0], **meta)
    rows = _rows_of(listed, meta, (2.1, 3.5))
    return dataclasses.replace(data, name="list", extras=extras, **rows)


def test_simulated_lists_are_those_that_the_model_expects():
    data = a_list(errors=(0.15, 0.35))
    response = build_response([data], SETTING)
    drawn = [sets[0] for sets in replicates([data], 300)]
    predicted = response.predict(THETA)
    expected = predicted[np.flatnonzero(data.role == EXPOSURE)[0]]
    n_listed = np.array([d.n_listed for d in drawn], dtype=float)
    assert 20.0 < expected < 500.0
    total = n_listed.sum()
    assert abs(total - 300.0 * expected) < 4.0 * np.sqrt(300.0 * expected)
    # Poisson: the variance of 300 has a standard error of √(2/300).
    assert n_listed.var() == pytest.approx(expected, rel=4.0 * np.sqrt(2.0 / 300.0))
    shown = data.role == SHOWN
    counts = np.array([d.observed[d.role == SHOWN] for d in drawn])
    bins = 300.0 * predicted[shown]
    assert (np.abs(counts.sum(axis=0) - bins) < 4.0 * np.sqrt(bins)).all()
    assert stats.chi2.sf(((counts.sum(axis=0) - bins) ** 2 / bins).sum(), len(bins)) > 1e-4
    # Controls: without completeness, or with other errors, the model expects something else.
    for extras in (
        {"completeness": np.ones(3)},
        {"errors_lo": np.full(4, 0.02), "errors_hi": np.full(4, 0.02)},
    ):
        other = dataclasses.replace(data, extras={**data.extras, **extras})
        wrong = 300.0 * build_response([other], SETTING).predict(THETA)[shown]
        assert stats.chi2.sf(((counts.sum(axis=0) - wrong) ** 2 / wrong).sum(), len(wrong)) < 1e-8


def test_simulated_lists_have_cells_that_hold_their_absorbers():
    (sets,) = replicates([a_list()], 1, seed=6)
    (data,) = sets
    cells = data.role == INTENSITY
    assert data.observed[cells].sum() == pytest.approx(data.n_listed)
    assert data.observed[data.role == SHOWN].sum() == data.n_listed
    assert ((data.role == EXPOSURE).sum(), data.n_rows) == (1, len(data.labels))
    mean = data.observed[cells] @ data.log_nhi_lo[cells] / data.n_listed
    assert 20.3 < mean < 21.9
    predicted = build_response([data], SETTING).predict(THETA)
    assert np.isfinite(Likelihood.from_datasets([data]).ln_total(predicted[None]))[0]


@pytest.mark.parametrize("kind", ["measured", "bounds", "wrong"])
def test_simulated_lists_have_the_density_of_the_likelihood(kind):
    changes = {"n_sightlines": 150, "errors": (0.1, 0.1001)}
    wide = {"errors_lo": np.full(4, 0.35), "errors_hi": np.full(4, 0.35)}
    wrong = kind == "wrong"  # the control: selection by errors that the list does not have
    # Bounds that no upper end of the list cuts off.
    more = {"bound": 20, "log_nhi_max": None} if kind == "bounds" else {}
    data = a_list(**changes, **more)
    theta = THETA.copy()
    theta[7:] -= 0.06  # steeper above the list's lower end, and with other evolution
    theta[12] += 0.3
    extras = wide if wrong else None
    mean, error = mean_ratio([data], theta, 200, rebuilt=True, extras=extras)
    assert error < 0.06
    assert bool(abs(mean - 1.0) > 4.0 * error) is wrong


def test_lower_bounds_keep_their_share_above_their_mean():
    data = a_list(bound=20, n_sightlines=4000)
    (sets,) = replicates([data], 1, seed=7)
    new = sets[0]
    bound = (new.role == INTENSITY) & (new.limit == -1)
    old = (data.role == INTENSITY) & (data.limit == -1)
    at = data.observed[old] @ data.log_nhi_lo[old] / 20.0
    n_bound = new.observed[bound].sum()
    # All bounds are at the mean of the data's.
    assert new.observed[bound] @ new.log_nhi_lo[bound] / n_bound == pytest.approx(at, abs=1e-6)
    measured_ = (new.role == INTENSITY) & (new.limit == 0)
    n_above = n_bound + new.observed[measured_ & (new.log_nhi_lo > at)].sum()
    rest = (data.role == INTENSITY) & (data.limit == 0) & (data.log_nhi_lo > at)
    share = 20.0 / (20.0 + data.observed[rest].sum())
    assert 0.2 < share < 0.8
    assert n_above > 100.0
    # Cells near the column itself share absorbers with those below: 5 standard errors.
    assert abs(n_bound / n_above - share) < 5.0 * np.sqrt(share * (1.0 - share) / n_above)


def test_scale_of_a_list_multiplies_its_number():
    data = a_list(scale={"dist": "norm", "loc": 1.0, "scale": 0.1}, n_sightlines=1500)
    expected = build_response([data], SETTING).predict(THETA)[data.role == EXPOSURE][0]
    theta = np.append(THETA, 2.0)
    n = np.array([sets[0].n_listed for sets in replicates([data], 20, theta=theta)]).sum()
    assert abs(n - 40.0 * expected) < 4.0 * np.sqrt(40.0 * expected)
    neutral = np.array([sets[0].n_listed for sets in replicates([data], 20)]).sum()
    assert abs(neutral - 20.0 * expected) < 4.0 * np.sqrt(20.0 * expected)


def test_long_lists_are_drawn_in_parts(monkeypatch):
    monkeypatch.setattr(simulate_module, "MOST_AT_ONCE", 17)
    data = a_list()
    expected = build_response([data], SETTING).predict(THETA)[data.role == EXPOSURE][0]
    n = np.array([sets[0].n_listed for sets in replicates([data], 50)]).sum()
    assert abs(n - 50.0 * expected) < 4.0 * np.sqrt(50.0 * expected)


@pytest.mark.parametrize("by", [-4.0, -400.0])
def test_a_list_may_come_out_empty(by):
    (sets,) = replicates([a_list()], 1, theta=shifted(by))
    (data,) = sets
    assert data.n_listed == 0
    assert (data.observed == 0.0).all()
    predicted = build_response([data], SETTING).predict(THETA)
    ln_p = Likelihood.from_datasets([data]).ln_total(predicted[None])
    assert_allclose(ln_p, -predicted[data.role == EXPOSURE])


# What is asked for


def test_a_fit_brings_its_cosmology_and_one_seed_gives_one_replicate():
    datasets = [*ordinary(), a_list()]
    fit = Fit(ANALYSIS, build_response(datasets, SETTING), {})
    first, again = (simulate(fit, THETA, np.random.default_rng(8)) for _ in range(2))
    assert [data.name for data in first] == [data.name for data in datasets]
    for one, two in zip(first, again, strict=True):
        assert_allclose(one.observed, two.observed, rtol=0.0)
    with pytest.raises(ValueError, match="list is a list of absorbers, and needs a cosmology"):
        simulate(fit.response, THETA, np.random.default_rng(8))
    with pytest.raises(ValueError, match=r"theta has the shape \(2, 13\), must be one vector"):
        simulate(fit, np.stack([THETA, THETA]), np.random.default_rng(8))


def test_infinite_predictions_are_no_measurements_but_may_be_lower_limits():
    path = hypothetical(
        "mean_free_path", [2.0], unit="Mpc", definition="unit_depth", frame="proper"
    )
    data = measured(path, [300.0])
    response = build_response([data], SETTING)
    assert np.isinf(response.predict(shifted(-2.0)))[0]
    with pytest.raises(ValueError, match="hypothetical: the replicate of row 0 is inf"):
        simulate(response, shifted(-2.0), np.random.default_rng(9))
    lower = dataclasses.replace(data, limit=np.array([-1]))
    (sets,) = replicates([lower], 1, theta=shifted(-2.0))
    assert (sets[0].limit[0], sets[0].observed[0]) == (-1, 300.0)
