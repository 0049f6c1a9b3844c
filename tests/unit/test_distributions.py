"""Distributions by name: what they are, and what is refused."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from fogline.distributions import continuous_names, frozen


def test_frozen_is_the_scipy_distribution_of_that_name():
    assert frozen({"dist": "norm", "loc": 1.5, "scale": 2}).ppf(0.975) == pytest.approx(
        1.5 + 2.0 * 1.959963985, abs=1e-8
    )
    u = np.linspace(0.05, 0.95, 7)
    assert_allclose(
        frozen({"dist": "beta", "a": 2, "b": 3.5, "loc": 1}).ppf(u), 1.0 + stats.beta(2, 3.5).ppf(u)
    )


def test_known_names_are_continuous_distributions():
    assert {"norm", "uniform", "lognorm", "truncnorm"} < set(continuous_names())
    assert not {"poisson", "binom", "rv_continuous"} & set(continuous_names())


@pytest.mark.parametrize(
    ("spec", "message"),
    [
        ({"loc": 1.0}, "needs the key 'dist'"),
        ({"dist": "nrom"}, "unknown distribution 'nrom'; did you mean 'norm'?"),
        ({"dist": "qqqq"}, r"unknown distribution 'qqqq'; allowed: those of scipy\.stats"),
        ({"dist": "poisson", "mu": 3}, "unknown distribution 'poisson'"),
        ({"dist": ["norm"]}, "unknown distribution"),
        ({"dist": "norm", "scal": 1}, "no argument 'scal'; did you mean 'scale'?"),
        ({"dist": "norm", "sigma": 1}, "no argument 'sigma'; allowed: loc, scale"),
        ({"dist": "beta", "a": 1.0}, "'beta' needs b"),
        ({"dist": "norm", "loc": "1.0"}, "loc of distribution 'norm' must be a number, got '1.0'"),
        ({"dist": "norm", "scale": True}, "scale of distribution 'norm' must be a number"),
        ({"dist": "norm", "loc": float("nan")}, "loc of distribution 'norm' must be a number"),
        ({"dist": "norm", "scale": -1.0}, "'norm' does not exist for {'scale': -1.0}"),
        ({"dist": "norm", "scale": 0.0}, "'norm' does not exist"),
        ({"dist": "beta", "a": -1.0, "b": 2.0}, "'beta' does not exist"),
        ({"dist": "truncnorm", "a": 2.0, "b": 1.0}, "'truncnorm' does not exist"),
    ],
)
def test_wrong_specifications_are_refused(spec, message):
    with pytest.raises(ValueError, match=message):
        frozen(spec)
