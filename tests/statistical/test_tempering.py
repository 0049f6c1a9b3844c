"""Tempered populations on posteriors whose evidence and moments are known."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from fogline.trust.tempering import temper


def populations(ln_likelihood, n_dim, n=6, **options):
    return [temper(ln_likelihood, n_dim, np.random.default_rng(s), **options) for s in range(n)]


def within(values, truth, n_sigma=4.5):
    """Whether the mean of independent values agrees with the truth."""
    values = np.asarray(values)
    error = values.std(axis=0, ddof=1) / np.sqrt(len(values))
    return np.all(np.abs(values.mean(axis=0) - truth) < n_sigma * error + 1e-9)


def test_narrow_normal_likelihood_in_closed_form():
    """Unit normal prior, likelihood N(mu, s²) in 8 dimensions: conjugate."""
    d, s = 8, 0.05
    mu = np.linspace(-1.5, 1.5, d)

    def ln_likelihood(x):
        return stats.norm.logpdf(mu, x, s).sum(axis=1)

    made = populations(ln_likelihood, d, n_particles=512)
    ln_z = stats.norm.logpdf(mu, 0.0, np.hypot(1.0, s)).sum()
    assert within([p.ln_z for p in made], ln_z)
    assert np.std([p.ln_z for p in made]) < 0.5
    assert within([p.x.mean(axis=0) for p in made], mu / (1.0 + s**2))
    width = s / np.hypot(1.0, s)
    assert np.mean([p.x.std(axis=0) for p in made]) == pytest.approx(width, rel=0.03)
    assert all(p.forgotten and p.temperatures[-1] == 1.0 for p in made)
    assert all((np.diff(p.temperatures) > 0.0).all() for p in made)


def test_two_peaks_keep_their_shares():
    """Peaks of weight 1 : 3 far apart, which a single chain would not join."""
    s = 0.1

    def ln_likelihood(x):
        far = stats.norm.logpdf(x[:, 0], 1.5, s) + np.log(0.75)
        near = stats.norm.logpdf(x[:, 0], -1.5, s) + np.log(0.25)
        return np.logaddexp(far, near) + stats.norm.logpdf(x[:, 1], 0.0, s)

    made = populations(ln_likelihood, 2, n_particles=512)
    assert within([np.mean(p.x[:, 0] > 0.0) for p in made], 0.75)


def test_curved_shell_with_regions_of_no_likelihood():
    """|x| measured, half of the space forbidden: Z by quadrature over the radius."""
    r0, s, d = 1.2, 0.05, 3

    def ln_likelihood(x):
        radius = np.sqrt((x**2).sum(axis=1))
        return np.where(x[:, 0] > 0.0, stats.norm.logpdf(r0, radius, s), -np.inf)

    r = np.linspace(1e-6, 6.0, 200_001)
    z = 0.5 * np.trapezoid(stats.chi.pdf(r, d) * stats.norm.pdf(r0, r, s), r)
    made = populations(ln_likelihood, d, n_particles=512)
    assert within([p.ln_z for p in made], np.log(z))
    assert all((p.x[:, 0] > 0.0).all() for p in made)
    # Uniform over directions of the half-sphere.
    assert within([np.mean(p.x[:, 0] / np.sqrt((p.x**2).sum(axis=1))) for p in made], 0.5)


def test_no_likelihood_anywhere_is_said():
    with pytest.raises(ValueError, match="no draw from the prior"):
        temper(lambda x: np.full(len(x), -np.inf), 2, np.random.default_rng(0), n_particles=64)
