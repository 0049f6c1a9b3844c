"""Hold-outs: data against fits that have not seen them, where the answer is known."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from fogline.datasets import hypothetical
from fogline.figures.tension import draw_shifts, draw_tension
from fogline.headlines import HeadlineDraws
from fogline.response import build_response
from fogline.response_file import Fit
from fogline.trust import hold_outs
from fogline.trust.held_out import held_out
from fogline.trust.hold_outs import fit_alone, hold_out, level_of, shifts
from fogline.trust.refit import refit, subset
from fogline.trust.tension_tables import pairwise_table, shift_table, tension_table
from small_study import ANALYSIS, SETTING, THETA, empty_datasets, in_bins

FOREST = {"form": "tau", "log_nhi_min": 12.0, "log_nhi_max": 17.2}


def depths(z, error):
    data = hypothetical("lya_opacity", z, **FOREST)
    predicted = build_response([data], SETTING).predict(THETA)
    err = error * predicted
    return dataclasses.replace(data, observed=predicted, err_lo=err, err_hi=err)


def spread(n, rng, width=0.02):
    """Draws of a fit: every f multiplied by one factor, so that predictions move together."""
    theta = np.tile(THETA, (n, 1))
    theta[:, : len(SETTING.distribution.pivots)] += width * rng.standard_normal((n, 1))
    return theta


def seen(data, theta, rng):
    """Data of one draw of the fit, with noise."""
    truth = build_response([data], SETTING).predict(theta)
    return dataclasses.replace(data, observed=truth + data.err_lo * rng.standard_normal(len(truth)))


def test_p_values_of_consistent_data_are_uniform():
    rng = np.random.default_rng(1)
    data = depths(np.linspace(2.0, 4.0, 5), error=0.05)
    response = build_response([data], SETTING)
    theta = spread(2000, rng, width=0.05)
    p_values, offsets = [], []
    for truth in spread(150, rng, width=0.05):
        measured = dataclasses.replace(response, datasets=(seen(data, truth, rng),))
        found = held_out(measured, theta, rng)
        p_values.append(found.p_value)
        offsets.append(found.offset)
    assert stats.kstest(p_values, "uniform").pvalue > 1e-3
    # The common offset is a standard normal, though the rows' predictions are nearly one number.
    assert stats.kstest(offsets, "norm").pvalue > 1e-3


def test_the_closed_form_of_one_measurement():
    """A row with error s against a prediction of width w: z = (y - m) / sqrt(s^2 + w^2)."""
    rng = np.random.default_rng(2)
    data = depths([2.5], error=0.05)
    m, s = float(data.observed[0]), float(data.err_lo[0])
    theta = spread(40_000, rng, width=0.01)
    w = float(build_response([data], SETTING).predict(theta).std())
    for z in (-2.0, 0.5, 2.5):
        y = np.array([m + z * np.hypot(s, w)])
        response = build_response([dataclasses.replace(data, observed=y)], SETTING)
        found = held_out(response, theta, rng)
        assert found.sigma == pytest.approx(abs(z), abs=0.08)
        assert np.sign(found.offset) == np.sign(z)
        assert not found.extrapolated
    far = dataclasses.replace(data, observed=np.array([m + 6.0 * np.hypot(s, w)]))
    found = held_out(build_response([far], SETTING), theta, rng)
    assert found.extrapolated
    assert 4.5 < found.sigma < 8.0


@pytest.mark.parametrize("sign", [1, -1])
def test_a_limit_counts_on_its_own_side(sign):
    rng = np.random.default_rng(3)
    data = depths([2.5], error=0.05)
    theta = spread(4000, rng)

    def p_value(factor):
        limit = dataclasses.replace(data, observed=data.observed * factor, limit=np.array([sign]))
        return held_out(build_response([limit], SETTING), theta, rng).p_value

    assert p_value(1.0 + 0.5 * sign) > 0.4
    assert p_value(1.0 - 0.5 * sign) < 1e-4


def test_counts_that_are_nearly_always_zero():
    rng = np.random.default_rng(4)
    bins = empty_datasets()[4]
    mean = build_response([bins], SETTING).predict(THETA)
    few = dataclasses.replace(bins, search_path=bins.search_path * 0.02 / mean)
    for count, low in ((0.0, 0.05), (3.0, 0.0)):
        response = build_response([dataclasses.replace(few, observed=np.full(4, count))], SETTING)
        p = held_out(response, np.tile(THETA, (2000, 1)), rng).p_value
        assert p > low
        assert (p < 1e-3) == (count > 0.0)


def test_shifts_are_in_units_of_the_difference():
    """Two posteriors of one mean: with variance 1 and, with more data, 1/4."""
    rng = np.random.default_rng(5)
    n = 200_000

    def draws(mean, sigma):
        values = mean + sigma * rng.standard_normal((n, 1))
        return HeadlineDraws(("rho_hi",), np.array([2.5]), values)

    (row,) = shifts(draws(3.0, 0.5), draws(2.0, 1.0))
    # The difference has variance 1 - 1/4, not 1 + 1/4.
    assert row["shift_sigma"] == pytest.approx(1.0 / np.sqrt(0.75), rel=0.02)
    (same,) = shifts(draws(3.0, 1.0), draws(2.0, 1.01))
    assert np.isnan(same["shift_sigma"])
    (beyond,) = shifts(
        draws(3.0, 0.5), HeadlineDraws(("a",), np.zeros(1), np.full((10, 1), np.inf))
    )
    assert np.isnan(beyond["shift_sigma"])


# A small study with one data set off by a fifth


def study(factor):
    """The small study's kinds of data, and a second set of LLS multiplied by a factor."""
    rng = np.random.default_rng(6)
    more = hypothetical("lls_incidence", [2.6, 3.0, 3.4, 3.8], per="dz", tau_min=2.0)
    forest = in_bins(
        hypothetical("column_distribution", [2.6] * 6, per="dX"),
        np.linspace(12.5, 15.5, 7),
        counts=True,
        search_path=np.ones(6),
    )
    # With 400 absorbers a bin: without forest counts the posterior is a thin shell, slow to sample.
    path = 400.0 / build_response([forest], SETTING).predict(THETA)
    forest = dataclasses.replace(forest, search_path=path)
    empty = [
        *empty_datasets(),
        dataclasses.replace(forest, name="forest", path="forest.ecsv"),
        dataclasses.replace(more, name="more_lls", path="more_lls.ecsv"),
    ]
    response = build_response(empty, SETTING)
    filled = []
    for data, rows in zip(empty, response.slices, strict=True):
        mean = response.predict(THETA)[rows]
        err = 0.05 * mean
        noisy = rng.poisson(mean) if data.counts else mean + err * rng.standard_normal(len(mean))
        scaled = noisy * (factor if data.name == "more_lls" else 1.0)
        filled.append(
            dataclasses.replace(data, observed=scaled.astype(float), err_lo=err, err_hi=err)
        )
    few = dataclasses.replace(ANALYSIS.sampler, target_ess=600)
    analysis = dataclasses.replace(ANALYSIS, sampler=few)
    return Fit(analysis, build_response(filled, SETTING), {"fingerprint": "", "inputs": {}})


@pytest.fixture(scope="module")
def wrong():
    fit = study(1.2)
    return fit, refit(fit)


def test_a_calibration_error_of_a_fifth_is_found(wrong):
    fit, joint = wrong
    assert joint.converged, joint.reasons
    found = [hold_out(fit, joint.theta, name, [name]) for name in ("more_lls", "density")]
    table = tension_table(found, 0.05)
    by_group = {str(row["group"]): row for row in table}
    assert by_group["more_lls"]["flag"] == "tension"
    assert by_group["more_lls"]["offset"] > 3.0  # data above the prediction of the others
    assert by_group["density"]["flag"] == ""
    moved = shift_table(found)
    incidence = moved[(moved["group"] == "more_lls") & (moved["quantity"] == "lx_lls_tau2")]
    assert np.nanmax(incidence["shift_sigma"]) > 2.5
    draw_shifts(moved)
    # Kinds against each other; fits alone are tested where they are quick to sample.
    others = tuple(d.name for d in fit.response.datasets if d.name != "more_lls")
    kinds = {"others": others, "more": ("more_lls",)}
    pairwise = pairwise_table([fit_alone(fit, kinds, "others")])
    assert list(pairwise["fitted"]) == ["others"]
    assert list(pairwise["predicted"]) == ["more"]
    assert pairwise["sigma"][0] == pytest.approx(by_group["more_lls"]["sigma"], abs=0.5)
    assert len(draw_tension(table, pairwise).axes) == 2
    assert len(draw_tension(table, pairwise[:0]).axes) == 1


def test_consistent_data_raise_no_flag_and_both_ways_agree(monkeypatch):
    fit = study(1.0)
    joint = refit(fit)
    found = {}
    for how, good_k in (("reweighted", np.inf), ("refitted", -np.inf)):
        monkeypatch.setattr(hold_outs, "GOOD_K", good_k)
        found[how] = hold_out(fit, joint.theta, "unit_depth", ["unit_depth"])
        assert found[how]["how"] == how
    assert found["reweighted"]["pareto_k"] < 0.7
    assert tension_table([found["refitted"]], 0.05)["flag"][0] == ""
    # Half-widths of 4000 draws, and a p-value of as many replicates.
    assert found["reweighted"]["sigma"] == pytest.approx(found["refitted"]["sigma"], abs=0.15)
    for name in ("median_without", "sigma_without"):
        reweighted, refitted = (
            np.array([shift[name] / shift["sigma"] for shift in found[how]["shifts"]])
            for how in ("reweighted", "refitted")
        )
        assert_allclose(reweighted, refitted, atol=0.25)


def test_a_fit_without_data_is_the_prior():
    fit = subset(study(1.0), [])
    made = refit(fit)
    assert made.converged
    assert stats.kstest(made.x[:2000, 0], "norm").pvalue > 1e-3


def test_level_shares_out_the_false_alarm():
    assert level_of(0.05, 1) == pytest.approx(0.05)
    assert 1.0 - (1.0 - level_of(0.05, 12)) ** 12 == pytest.approx(0.05)
    assert_allclose(level_of(0.05, 0), 0.05)
