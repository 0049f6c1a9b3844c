"""Quadrature rules on integrands with closed forms."""

from itertools import pairwise

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.integrate import quad

from fogline.cosmology import Cosmology
from fogline.quadrature import column_nodes, interval_nodes, redshift_nodes

KINKS = (12.0, 14.0, 17.2, 20.3, 22.5)


def test_gauss_legendre_integrates_polynomials_exactly():
    nodes, weights = interval_nodes(-1.0, 3.0, 5)
    for power in range(10):
        expected = (3.0 ** (power + 1) - (-1.0) ** (power + 1)) / (power + 1)
        assert weights @ nodes**power == pytest.approx(expected, rel=1e-13)
    # And one degree more, not: the rule has no nodes to spare.
    assert weights @ nodes**10 != pytest.approx((3.0**11 + 1.0) / 11.0, rel=1e-6)


@pytest.mark.parametrize("beta", [0.1, 1.0, 1.5, 2.0, 3.0, 5.0])
def test_power_laws_in_column(beta):
    log_nhi, weights = column_nodes(12.5, 21.7, KINKS)
    low, high = 10.0**12.5, 10.0**21.7
    expected = np.log(high / low)
    if beta != 1.0:
        expected = (high ** (1.0 - beta) - low ** (1.0 - beta)) / (1.0 - beta)
    assert 10.0 ** (-beta * log_nhi) @ weights == pytest.approx(expected, rel=1e-6)


def test_no_panel_crosses_a_kink():
    log_nhi, weights = column_nodes(13.0, 21.0, KINKS)
    inside = [13.0, 14.0, 17.2, 20.3, 21.0]
    for low, high in pairwise(inside):
        panel = (log_nhi > low) & (log_nhi < high)
        # Each panel by itself integrates dN.
        assert weights[panel].sum() == pytest.approx(10.0**high - 10.0**low, rel=1e-8)
    assert not np.isin(log_nhi, inside).any()


def test_kinks_at_the_limits_or_outside_are_passed_over():
    with_all, _ = column_nodes(14.0, 17.2, KINKS)
    without, _ = column_nodes(14.0, 17.2, ())
    assert_allclose(with_all, without, rtol=0)


def test_single_redshift_is_one_node():
    z, weights = redshift_nodes(2.4, 2.4, Cosmology(70.0, 0.3))
    assert z.tolist() == [2.4]
    assert weights.tolist() == [1.0]


@pytest.mark.parametrize("cosmology", [Cosmology(70.0, 0.3), Cosmology(70.0, 1.0, 0.0)])
@pytest.mark.parametrize("ends", [(2.0, 2.05), (2.0, 3.0), (2.0, 5.0), (0.0, 1.0)])
def test_mean_over_a_bin_is_weighted_by_absorption_distance(ends, cosmology):
    z, weights = redshift_nodes(*ends, cosmology)
    assert weights.sum() == pytest.approx(1.0, abs=1e-14)
    for exponent in (-2.0, 2.5, 6.0):
        expected = quad(lambda x: (1.0 + x) ** exponent * cosmology.dx_dz(x), *ends)[0]  # noqa: B023
        expected /= quad(cosmology.dx_dz, *ends)[0]
        assert weights @ (1.0 + z) ** exponent == pytest.approx(expected, rel=3e-5)
