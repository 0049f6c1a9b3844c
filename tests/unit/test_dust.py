"""Hidden sightlines: limits, a closed form for power-law counts, and the variance of the mass."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fogline.derived import DERIVED_TABLES, Draws
from fogline.derived.hi_density import dust_factor, variance_above
from fogline.dust import DustModel
from small_study import ANALYSIS, SETTING, THETA

DEPTH = {"dist": "norm", "loc": 0.05, "scale": 1e-6}
STEEP = DustModel(18.0, 25.0, 0.8, 0.3, DEPTH)  # far brighter than the break: one power law


def test_power_law_counts_have_a_closed_form():
    # n(< m) ∝ 10^(b m): the share left behind A magnitudes is 10^(-b A).
    log_nhi = np.array([20.3, 21.0, 21.7])
    kept = STEEP.kept(log_nhi, np.array([0.1]))[0]
    dimming = 1.0857362 * 0.1 * 10.0 ** (log_nhi - 21.0)
    assert_allclose(kept, 10.0 ** (-0.8 * dimming), rtol=1e-3)


def test_flat_counts_hide_less_and_no_dust_hides_nothing():
    flat = dataclasses.replace(STEEP, break_magnitude=15.0)
    log_nhi = np.array([21.5])
    assert flat.kept(log_nhi, np.array([0.2])) > STEEP.kept(log_nhi, np.array([0.2]))
    assert_allclose(STEEP.kept(log_nhi, np.array([0.0])), 1.0, rtol=1e-12)


def draws(theta=THETA[None], **changes):
    derive = dataclasses.replace(ANALYSIS.derive, **changes)
    return Draws(theta, SETTING, derive)


def test_factor_of_the_mass():
    plain = DERIVED_TABLES["hi_density"].curves(draws())
    assert "dust_factor" not in plain
    dust = {
        "magnitude_limit": 18.0,
        "break_magnitude": 25.0,
        "bright_slope": 0.8,
        "faint_slope": 0.3,
        "optical_depth": DEPTH,
    }
    found = DERIVED_TABLES["hi_density"].curves(draws(dust=dust))
    factor = found["dust_factor"].values
    assert np.all(factor > 1.02)
    assert_allclose(found["rho_hi_dust"].values, factor * plain["rho_hi"].values)
    none = dataclasses.replace(STEEP, optical_depth={"dist": "norm", "loc": 1e-9, "scale": 1e-12})
    assert_allclose(dust_factor(draws(), none), 1.0, atol=1e-6)


def test_omega_gas_has_the_helium_factor():
    found = DERIVED_TABLES["hi_density"].curves(draws(helium_factor=1.0 / 0.76))
    assert_allclose(found["omega_gas"].values, found["omega_hi"].values / 0.76, rtol=1e-12)


def test_variance_above_a_column():
    rng = np.random.default_rng(2)
    high, low = np.tile(THETA, (2, 400, 1))
    high[:, 9] += 0.3 * rng.standard_normal(400)  # the last pivot alone moves
    low[:, 6:8] += 0.1 * rng.standard_normal((400, 1))  # pivots at 20.3 and 21.0
    # The slope at the pivot before bends with it, by a tenth of the effect.
    assert variance_above(draws(high), 21.6) == pytest.approx(1.0, abs=0.12)
    assert variance_above(draws(low), 21.6) == pytest.approx(0.0, abs=0.12)
    both = np.concatenate([high, low])
    share = variance_above(draws(both), 21.6)
    assert 0.05 < share < 0.95
    note = DERIVED_TABLES["hi_density"].note(dataclasses.replace(draws(both), highest_column=21.6))
    assert note.startswith(f"{100 * share:.0f}% of the posterior variance of rho_hi lies above")
