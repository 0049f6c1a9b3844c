"""Averages over the Doppler parameter against adaptive quadrature over its density."""

from itertools import pairwise

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import integrate

from fogline.atomic import LYMAN_SERIES, equivalent_width
from fogline.distributions import frozen
from fogline.doppler import doppler_average, mean_equivalent_width

LOG_NHI = np.array([12.5, 14.0, 15.5, 17.0, 19.0, 21.0])


def density(settings):
    if settings["dist"] == "hui_rutledge":
        fourth = settings["b_sigma"] ** 4
        return lambda b: 4.0 * fourth * b**-5.0 * np.exp(-fourth / b**4)
    distribution = frozen(settings)
    return lambda b: distribution.pdf(b) / distribution.sf(0.0)


def mean_by_quad(settings, kinks):
    pdf = density(settings)

    def integrand(ln_b):
        b = np.exp(ln_b)
        return b * pdf(b) * np.append(equivalent_width(LOG_NHI, b), 1.0)

    edges = np.log(sorted({1e-7, 3.0, 10.0, 20.0, 30.0, 60.0, 200.0, 2e3, 1e5, *kinks}))
    pieces = [
        integrate.quad_vec(integrand, low, high, epsabs=1e-10, epsrel=1e-9)[0]
        for low, high in pairwise(edges)
    ]
    total = np.sum(pieces, axis=0)
    assert total[-1] == pytest.approx(1.0, abs=1e-6)  # the reference caught the whole density
    return total[:-1]


CASES = [
    ({"dist": "hui_rutledge", "b_sigma": 24.0}, ()),
    ({"dist": "hui_rutledge", "b_sigma": 9.0}, ()),
    ({"dist": "norm", "loc": 26.0, "scale": 8.0}, ()),
    ({"dist": "norm", "loc": 5.0, "scale": 20.0}, ()),  # 40% of it is cut
    ({"dist": "lognorm", "s": 0.4, "scale": 26.0}, ()),
    ({"dist": "gamma", "a": 3.0, "scale": 8.0}, ()),
    ({"dist": "invgamma", "a": 4.0, "scale": 80.0}, ()),  # falls as b^-5
    ({"dist": "expon", "scale": 25.0}, ()),
    ({"dist": "uniform", "loc": 15.0, "scale": 20.0}, (15.0, 35.0)),
    ({"dist": "triang", "c": 0.3, "loc": 10.0, "scale": 40.0}, (22.0, 50.0)),
    ({"dist": "laplace", "loc": 26.0, "scale": 8.0}, (26.0,)),
]


@pytest.mark.parametrize(("settings", "kinks"), CASES, ids=lambda v: str(v)[:40])
def test_mean_equivalent_width_agrees_with_quadrature(settings, kinks):
    assert_allclose(
        mean_equivalent_width(LOG_NHI, settings), mean_by_quad(settings, kinks), rtol=1e-5
    )


@pytest.mark.parametrize("settings", [case for case, _ in CASES])
def test_weights_are_a_probability_over_positive_nodes(settings):
    nodes, weights = doppler_average(settings)
    assert nodes.shape == weights.shape
    assert np.all(nodes > 0.0)
    assert np.all(weights > 0.0)
    assert weights.sum() == pytest.approx(1.0, abs=1e-14)


def test_hui_rutledge_moments():
    # u = (b_sigma/b)^4 is distributed as exp(-u): <b^-4> = b_sigma^-4, <b^-8> = 2 b_sigma^-8.
    nodes, weights = doppler_average({"dist": "hui_rutledge", "b_sigma": 24.0})
    assert weights @ (24.0 / nodes) ** 4 == pytest.approx(1.0, rel=1e-7)
    assert weights @ (24.0 / nodes) ** 8 == pytest.approx(2.0, rel=1e-7)


def test_fixed_parameter_is_a_single_node():
    nodes, weights = doppler_average({"dist": "fixed", "b": 26})
    assert nodes.tolist() == [26.0]
    assert weights.tolist() == [1.0]
    line = LYMAN_SERIES[2]
    assert_allclose(
        mean_equivalent_width(LOG_NHI, {"dist": "fixed", "b": 26}, line),
        equivalent_width(LOG_NHI, 26.0, line),
        rtol=1e-14,
    )


def test_narrow_distribution_tends_to_its_centre():
    narrow = mean_equivalent_width(LOG_NHI, {"dist": "norm", "loc": 26.0, "scale": 1e-3})
    assert_allclose(narrow, equivalent_width(LOG_NHI, 26.0), rtol=1e-8)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"b": 26.0}, "needs the key 'dist'"),
        ({"dist": "fixd", "b": 26.0}, "did you mean 'fixed'?"),
        ({"dist": "fixed"}, "'fixed' needs b"),
        ({"dist": "fixed", "b": -1.0}, r"b must be positive \[km/s\], got -1.0"),
        ({"dist": "hui_rutledge", "bsigma": 24.0}, "did you mean 'b_sigma'?"),
        ({"dist": "hui_rutledge", "b_sigma": 0.0}, "b_sigma must be positive"),
        ({"dist": "norm", "mean": 26.0}, "no argument 'mean'"),
        ({"dist": "uniform", "loc": -30.0, "scale": 20.0}, "no Doppler parameter is positive"),
        ({"dist": "cauchy", "loc": 26.0, "scale": 5.0}, "no finite mean"),
    ],
)
def test_wrong_settings_are_refused(settings, message):
    with pytest.raises(ValueError, match=message):
        doppler_average(settings)
