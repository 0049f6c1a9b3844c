"""A joint fit of published measurements near z = 2.4 predicts others that it has not seen.

Fitted (status as of the numbers at hand: seen in the paper's text, or recalled):

- flux decrement 0.0062 (1+z)^2.75, 1.6 < z < 3.2, strong absorbers excluded: Kirkman et al. 2005
  (text). The error of 8% is this test's own: about what metals and continua leave open;
- ℓ(z) = (1.46 ± 0.11) [(1+z)/4]^(1.70 ± 0.22), τ ≥ 2: Crighton et al. 2019 (text). Two rows for two
  parameters, with errors propagated from both;
- mean free paths 22.2 ± 2.3 and 15.1 ± 1.8 proper Mpc at z = 4.56 and 4.86: Worseck et al. 2014
  (text), the distance at which the flux is attenuated by 1/e;
- f(N) of DLAs in bins: the Γ-function of Noterdaeme et al. 2009 (memory), error 0.05 dex.

Held out (all text): ℓ(X) = 0.29 ± 0.05 at 2.0 < z < 2.5 and a free path of 252 ± 43 Mpc at z = 2.4
(O'Meara et al. 2013; H0 = 72; that Om0 is 0.26 and the path that of unit depth is this test's
reading); Ω_HI = 0.98 +0.20/-0.18 × 10^-3 at z = 4.9, sub-DLAs included (Crighton et al. 2015);
sub-DLAs hold 15% of the H I (O'Meara et al. 2007), between 8 and 20% (Zafar et al. 2013).
Assumed besides: DLAs evolve slowly, with an exponent 0.5 ± 0.5 of (1+z); common practice in words
("hardly evolves"), this test's own choice in numbers. Left out: 147 ± 15 Mpc of Rudie et al. 2013,
which counts absorbers without the gas around galaxies.

Agreement: within 2σ, σ being the posterior's and the published error in quadrature, since the two
are independent. A check below says that each prediction is sharp enough for that to be a test.
"""

import dataclasses

import numpy as np
import pytest
from astropy.table import Table
from scipy.integrate import quad

from fogline.constraint_files import read_constraint_file
from fogline.cosmology import Cosmology
from fogline.datasets import hypothetical
from fogline.ensemble import run_ensemble
from fogline.posterior import Posterior
from fogline.priors import Prior
from fogline.response import build_response
from small_study import EDGES, MODEL, SAMPLER, SETTING

FLAT = {"H0": 70.0, "Om0": 0.3}

# DLAs change by a factor of two from z = 5 to 2 at most (common practice).
SLOW = {"dist": "norm", "loc": 0.5, "scale": 0.5}
EVOLUTION = dataclasses.replace(MODEL.evolution, priors=(*MODEL.evolution.priors[:2], SLOW))
PRIOR = Prior(dataclasses.replace(MODEL, evolution=EVOLUTION))
QUICK = dataclasses.replace(SAMPLER, target_ess=2000, max_steps=1500)


def decrement():
    z = np.array([1.9, 2.4, 2.9])
    value = 0.0062 * (1.0 + z) ** 2.75
    meta = {
        "quantity": "lya_opacity",
        "form": "decrement",
        "log_nhi_min": 12.0,
        "log_nhi_max": 17.2,
        "source": "Kirkman et al. 2005",
    }
    return Table({"z": z, "value": value, "err": 0.08 * value}, meta=meta)


def lls_incidence():
    z = np.array([2.4, 3.6])
    value = 1.46 * ((1.0 + z) / 4.0) ** 1.70
    relative = np.hypot(0.11 / 1.46, 0.22 * np.log((1.0 + z) / 4.0))
    meta = {
        "quantity": "lls_incidence",
        "per": "dz",
        "tau_min": 2.0,
        "source": "Crighton et al. 2019",
    }
    return Table({"z": z, "value": value, "err": relative * value}, meta=meta)


def free_path():
    meta = {
        "quantity": "mean_free_path",
        "definition": "unit_depth",
        "frame": "proper",
        "cosmology": FLAT,
        "source": "Worseck et al. 2014",
    }
    table = Table({"z": [4.56, 4.86], "value": [22.2, 15.1], "err": [2.3, 1.8]}, meta=meta)
    table["value"].unit = table["err"].unit = "Mpc"
    return table


def damped_systems():
    def f(log_nhi):
        relative = 10.0 ** (log_nhi - 21.26)
        return 10.0**-22.75 * relative**-1.27 * np.exp(-relative)

    lo, hi = np.array(EDGES[:-1]), np.array(EDGES[1:])
    number = [
        quad(lambda p: f(p) * 10.0**p * np.log(10.0), a, b)[0] for a, b in zip(lo, hi, strict=True)
    ]
    meta = {
        "quantity": "column_distribution",
        "per": "dX",
        "cosmology": FLAT,
        "source": "Noterdaeme et al. 2009",
    }
    columns = {
        "z": np.full(len(lo), 2.5),
        "log_nhi_lo": lo,
        "log_nhi_hi": hi,
        "log_f": np.log10(number / (10.0**hi - 10.0**lo)),
        "err": np.full(len(lo), 0.05),
    }
    return Table(columns, meta=meta)


FITTED = {
    "decrement": decrement,
    "lls_incidence": lls_incidence,
    "free_path": free_path,
    "damped_systems": damped_systems,
}


def fit(folder, **changed):
    """Posterior draws of the joint fit, from constraint files."""
    datasets = []
    for name, make in (FITTED | changed).items():
        make().write(folder / f"{name}.ecsv", format="ascii.ecsv")
        datasets.append(read_constraint_file(folder / f"{name}.ecsv"))
    posterior = Posterior.of(build_response(datasets, SETTING), PRIOR)
    result = run_ensemble(posterior.ln_prob, posterior.n_dim, QUICK, 0)
    x = result.chain[::10].reshape(-1, posterior.n_dim)
    return PRIOR.to_parameters(x)


@pytest.fixture(scope="module")
def draws(tmp_path_factory):
    return fit(tmp_path_factory.mktemp("published"))


def held_out():
    """What was published, with its convention: rows, value, lower and upper error."""
    omeara = Cosmology(72.0, 0.26)
    lls = hypothetical("lls_incidence", [2.0], per="dX", tau_min=2.0)
    lls = dataclasses.replace(lls, z_hi=np.array([2.5]), cosmology=omeara)
    path = hypothetical(
        "mean_free_path", [2.4], unit="Mpc", definition="unit_depth", frame="proper"
    )
    path = dataclasses.replace(path, cosmology=omeara)
    density = hypothetical("hi_density", [4.9], form="omega_hi", log_nhi_min=19.0)
    density = dataclasses.replace(density, cosmology=Cosmology(**FLAT))
    return {
        "lx_lls": (lls, 0.29, 0.05, 0.05),
        "free_path": (path, 252.0, 43.0, 43.0),
        "omega_hi": (density, 0.98e-3, 0.18e-3, 0.20e-3),
    }


def predictions(theta, name):
    return build_response([held_out()[name][0]], SETTING).predict(theta)[:, 0]


def spread(values):
    """Half the 68% interval of ln; quantiles, since a free path may lie beyond reach."""
    low, high = np.quantile(values, [0.16, 0.84], method="inverted_cdf")
    return 0.5 * np.log(high / low)


def pull(theta, name):
    """(published - predicted) over the errors of both, in ln: all of them are positive."""
    _, value, err_lo, err_hi = held_out()[name]
    predicted = predictions(theta, name)
    difference = np.log(value / np.quantile(predicted, 0.5, method="inverted_cdf"))
    error = (err_lo if difference > 0.0 else err_hi) / value
    return difference / np.hypot(spread(predicted), error)


@pytest.mark.parametrize("name", ["lx_lls", "free_path", "omega_hi"])
def test_published_values_that_were_not_fitted(draws, name):
    assert abs(pull(draws, name)) < 2.0


def test_sub_dla_share_of_the_mass(draws):
    def density(low, high):
        data = hypothetical("hi_density", [2.5], form="omega_hi", log_nhi_min=low, log_nhi_max=high)
        return build_response([data], SETTING).predict(draws)[:, 0]

    share = density(19.0, 20.3) / density(19.0, 22.5)
    assert 0.08 < np.median(share) < 0.20


SHARP = {"lx_lls": 0.15, "free_path": 0.4, "omega_hi": 0.4}


@pytest.mark.parametrize("name", SHARP)
def test_predictions_are_sharp_enough_to_fail(draws, name):
    # The prior alone leaves each open by factors.
    assert spread(predictions(draws, name)) < SHARP[name]
    x = np.random.default_rng(1).standard_normal((2000, PRIOR.n_dim))
    assert spread(predictions(PRIOR.to_parameters(x), name)) > 2.0


def test_incidence_of_the_wrong_path_is_noticed(tmp_path):
    # The control: ℓ(z) taken for ℓ(X), a factor of three.
    def misread():
        table = lls_incidence()
        table.meta |= {"per": "dX", "cosmology": FLAT}
        return table

    theta = fit(tmp_path, lls_incidence=misread)
    assert abs(pull(theta, "lx_lls")) > 3.0
