"""Forms of high columns: slopes, continuity, limits, and discs drawn one by one."""

import itertools

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from fogline.config_settings import HIGH_COLUMN_PRIORS
from fogline.distribution import ColumnDistribution
from fogline.high_columns import FORMS, LN10

SHAPES = {"gamma": (1.3, 21.3), "double_power_law": (1.8, 3.4, 21.4), "discs": (21.4,)}
JOIN = 20.3


def ln_shape(form, log_nhi, shape=None):
    parameters = np.array([shape or SHAPES[form]], dtype=float)
    return FORMS[form].ln_shape(parameters, np.atleast_1d(np.asarray(log_nhi, float)), JOIN)[0]


def slope(form, log_nhi, shape=None, h=1e-5):
    up, down = (ln_shape(form, log_nhi + side, shape)[0] for side in (h, -h))
    return (up - down) / (2.0 * h * LN10)


@pytest.mark.parametrize("form", FORMS)
def test_every_form_is_one_at_the_join_and_has_its_priors(form):
    assert ln_shape(form, JOIN)[0] == 0.0
    assert tuple(HIGH_COLUMN_PRIORS[form]) == FORMS[form].names


@pytest.mark.parametrize("form", FORMS)
def test_many_curves_are_each_their_own(form):
    log_nhi = np.linspace(20.4, 22.4, 9)
    many = np.array([SHAPES[form], np.array(SHAPES[form]) + 0.1])
    together = FORMS[form].ln_shape(many, log_nhi, JOIN)
    assert together.shape == (2, 9)
    for one, parameters in zip(together, many, strict=True):
        assert_allclose(one, ln_shape(form, log_nhi, tuple(parameters)), rtol=1e-14)


def test_gamma_is_scipys():
    # N^-slope exp(-N/N_c) is the density of scipy's gamma of shape 1 - slope (slope < 1).
    n_c, power = 10.0**21.0, 0.4
    log_nhi = np.array([20.5, 21.0, 21.8])
    density = stats.gamma(1.0 - power, scale=n_c).logpdf(10.0 ** np.append(log_nhi, JOIN))
    assert_allclose(ln_shape("gamma", log_nhi, (power, 21.0)), density[:3] - density[3], rtol=1e-12)


@pytest.mark.parametrize(
    ("form", "log_nhi", "expected"),
    [
        ("double_power_law", 21.0, -1.8),
        ("double_power_law", 22.0, -3.4),
        ("gamma", 20.9, -1.3 - 10.0 ** (20.9 - 21.3)),
        ("discs", 22.0, -3.0),
        ("discs", 21.4 - 1e-4, -3.0),  # continuous at the face-on central column
        ("discs", 21.4 - 0.5 / LN10, -2.0),
    ],
)
def test_logarithmic_slopes(form, log_nhi, expected):
    assert slope(form, log_nhi) == pytest.approx(expected, abs=1e-3)


def test_break_below_the_join_leaves_the_steep_law_alone():
    assert_allclose(
        ln_shape("double_power_law", [20.8, 22.0], (1.0, 3.0, 20.0)),
        -3.0 * LN10 * (np.array([20.8, 22.0]) - JOIN),
        rtol=1e-12,
    )


def test_discs_drawn_one_by_one():
    """Radii even over the area, inclinations even in their cosine: the columns follow the form."""
    rng = np.random.default_rng(17)
    n_discs, reach, log_n0 = 2_000_000, 12.0, 21.4
    radius = reach * np.sqrt(rng.random(n_discs))  # in scale lengths, weighted by face-on area
    cosine = rng.random(n_discs)
    log_nhi = log_n0 - radius / LN10 - np.log10(cosine)
    # A disc is met in proportion to its projected area.
    edges = np.array([20.3, 20.6, 20.9, 21.2, 21.4, 21.6, 22.0, 22.5])
    counts = np.histogram(log_nhi, edges, weights=cosine)[0]
    variance = np.histogram(log_nhi, edges, weights=cosine**2)[0]
    fine = np.linspace(20.3, 22.5, 4401)
    f = np.exp(ln_shape("discs", fine, (log_n0,))) * LN10 * 10.0**fine
    expected = _integrals(f, fine, edges)
    scale = counts.sum() / expected.sum()
    pulls = (counts - scale * expected) / np.sqrt(variance)
    # Six degrees of freedom.
    assert stats.chi2(6).sf((pulls**2).sum()) > 1e-3
    # The control: N^-2 up to N_0, which is often assumed for discs, is refused.
    wrong = np.where(fine < log_n0, 10.0 ** (-(fine - log_n0)), 10.0 ** (-2.0 * (fine - log_n0)))
    other = _integrals(wrong, fine, edges)
    pulls = (counts - counts.sum() / other.sum() * other) / np.sqrt(variance)
    assert (pulls**2).sum() > 1000.0


def _integrals(f, log_nhi, edges):
    bins = [(log_nhi >= lo - 1e-9) & (log_nhi <= hi + 1e-9) for lo, hi in itertools.pairwise(edges)]
    return np.array([np.trapezoid(f[inside], log_nhi[inside]) for inside in bins])


def test_f_is_continuous_at_the_join_and_ends_at_the_top():
    distribution = ColumnDistribution(2.5, (12.0, 17.0, 20.3), (14.0,), form="gamma", top=22.5)
    theta = np.array([-10.0, -18.0, -21.6, 1.5, *SHAPES["gamma"]])
    below, at, above = distribution.log_f(theta, [20.3 - 1e-7, 20.3, 20.3 + 1e-7], 3.3)
    assert below == pytest.approx(at, abs=1e-5)
    assert above == pytest.approx(at, abs=1e-5)
    assert distribution.column_range == (12.0, 22.5)
    assert distribution.names[-2:] == ("gamma[slope]", "gamma[log_nc]")
    with pytest.raises(ValueError, match="undefined above"):
        distribution.log_f(theta, [22.6], 3.3)
