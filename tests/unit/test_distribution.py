"""The column-density distribution against a direct evaluation through scipy."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from fogline.distribution import ColumnDistribution
from reference_integrals import Truth, background
from small_study import EVOLUTION_PIVOTS, EXPONENTS, LOG_F, MODEL, PIVOTS, THETA

DISTRIBUTION = ColumnDistribution.from_settings(MODEL)


def test_parameters_are_log_f_at_the_pivots_at_the_reference_redshift():
    assert_allclose(DISTRIBUTION.log_f(THETA, PIVOTS, 2.5), LOG_F, rtol=1e-14)


def test_exponents_are_those_of_one_plus_z():
    # A decade in 1 + z makes the difference of log f the exponent itself.
    log_nhi = [12.0, 14.0, 17.5, 20.3, 22.5]
    growth = DISTRIBUTION.log_f(THETA, log_nhi, 34.0) - DISTRIBUTION.log_f(THETA, log_nhi, 2.5)
    assert_allclose(growth, [1.9, 1.9, 2.0, 0.6, 0.6], rtol=1e-12)


@pytest.mark.parametrize("z", [0.3, 2.5, 5.0])
def test_agrees_with_scipy(z):
    rng = np.random.default_rng(3)
    log_nhi = np.union1d(np.linspace(12.0, 22.5, 301), PIVOTS)
    theta = np.concatenate(
        [-np.cumsum(rng.uniform(0.1, 5.0, (20, 10)), axis=1), rng.uniform(-2, 6, (20, 3))], axis=1
    )
    values = DISTRIBUTION.log_f(theta, log_nhi, z)
    assert values.shape == (20, len(log_nhi))
    for row, value in zip(theta, values, strict=True):
        truth = Truth(
            2.5, PIVOTS, tuple(row[:10]), EVOLUTION_PIVOTS, tuple(row[10:]), background(70.0, 0.3)
        )
        assert_allclose(value, np.log10(truth.f(log_nhi, z)), rtol=1e-12)


def test_one_evolution_pivot_is_one_exponent_everywhere():
    single = ColumnDistribution(2.5, PIVOTS, (17.0,))
    theta = np.array([*LOG_F, 1.4])
    growth = single.log_f(theta, PIVOTS, 34.0) - np.array(LOG_F)
    assert_allclose(growth, 1.4, rtol=1e-12)


def test_names_and_kinks_are_in_order():
    assert DISTRIBUTION.names[0] == "log_f[12.0]"
    assert DISTRIBUTION.names[-1] == "evolution[20.3]"
    assert DISTRIBUTION.n_parameters == len(DISTRIBUTION.names) == 13
    assert_array_equal(DISTRIBUTION.kinks, sorted({*PIVOTS, *EVOLUTION_PIVOTS}))
    assert len(DISTRIBUTION.kinks) == 11  # 14.0 alone is not among the pivots


@pytest.mark.parametrize("log_nhi", [11.99, 22.51])
def test_beyond_the_pivots_f_is_undefined(log_nhi):
    with pytest.raises(ValueError, match="pivots"):
        DISTRIBUTION.log_f(THETA, [15.0, log_nhi], 2.5)


def test_expanded_parameters_hold_exponents_unchanged():
    assert_array_equal(DISTRIBUTION.expand(THETA)[-3:], EXPONENTS)
