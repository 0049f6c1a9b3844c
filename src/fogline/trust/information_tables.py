"""Tables of who constrains what: by quantity, along log N, and by data set."""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

from fogline.derived import Draws
from fogline.headlines import headline_draws
from fogline.posterior import Posterior
from fogline.trust.information import Information, gradient_of, information_at, power_scaling

Array = NDArray[np.float64]
MakeDraws = Callable[[Array], Draws]

COLUMN_STEP: Final = 0.1
"""Distance of columns in the table along log N [dex]."""

DEFINITION: Final = (
    "share_D: part of the squared error of a quantity that stands in the place of data set D, "
    "share_prior that of the prior; they add up to one. From Fisher information at the posterior "
    "mean (linear). sigma: half the 68% width of the draws; sigma_linear: the linear error; where "
    "the two differ much the posterior is curved and shares are a guide. "
)

SENSITIVITY: Final = (
    "prior_sensitivity, likelihood_sensitivity: shift of the mean in units of sigma when the power "
    "of the prior (of the likelihood) doubles, to first order; above about 0.3 in the first the "
    "prior matters, and with both large prior and data disagree. "
)


def information_tables(
    posterior: Posterior, x: Array, theta: Array, make_draws: MakeDraws
) -> dict[str, Table]:
    """Return the tables ``information``, ``information_by_column``, ``constraints``.

    Parameters
    ----------
    posterior : Posterior
    x, theta : ndarray, shape (n_draws, n_dim)
        The same posterior draws in both spaces.
    make_draws : callable
        From parameter vectors to `Draws`, for derived quantities.
    """
    at = x.mean(axis=0)
    found = information_at(posterior, at)
    return {
        "information": _by_quantity(posterior, found, at, x, theta, make_draws),
        "information_by_column": _by_column(posterior, found, at, theta, make_draws),
        "constraints": _by_dataset(posterior, found),
    }


def _by_quantity(
    posterior: Posterior,
    found: Information,
    at: Array,
    x: Array,
    theta: Array,
    make_draws: MakeDraws,
) -> Table:
    prior = posterior.prior
    headlines = headline_draws(make_draws(theta))

    def quantities(points: Array) -> Array:
        parameters = prior.to_parameters(points)
        return np.concatenate([parameters, headline_draws(make_draws(parameters)).values], axis=1)

    values = np.concatenate([theta, headlines.values], axis=1)
    table = Table()
    table["quantity"] = [*prior.names, *headlines.quantities]
    table["z"] = np.concatenate([_parameter_redshifts(posterior), headlines.z])
    _add_shares(table, found, gradient_of(quantities, at), values)
    table["prior_sensitivity"] = power_scaling(values, prior.ln_density(x))
    table["likelihood_sensitivity"] = power_scaling(values, posterior.ln_likelihood(theta))
    table.meta["definition"] = DEFINITION + SENSITIVITY + "z is NaN where a parameter has none."
    return table


def _parameter_redshifts(posterior: Posterior) -> Array:
    """Return the redshift of pivots, NaN for the other parameters."""
    distribution = posterior.response.distribution
    z = np.full(posterior.n_dim, np.nan)
    z[: len(distribution.pivots)] = distribution.reference_redshift
    return z


def _by_column(
    posterior: Posterior, found: Information, at: Array, theta: Array, make_draws: MakeDraws
) -> Table:
    distribution = posterior.response.distribution
    lo, hi = distribution.column_range
    grid = np.linspace(lo, hi, 1 + round((hi - lo) / COLUMN_STEP))
    z = float(distribution.reference_redshift)

    def log_f(parameters: Array) -> Array:
        return distribution.log_f(parameters, grid, z)

    table = Table()
    table["log_nhi"] = grid
    gradient = gradient_of(lambda points: log_f(posterior.prior.to_parameters(points)), at)
    _add_shares(table, found, gradient, log_f(theta))
    table["log_nhi"].unit = "dex(cm-2)"
    table.meta["definition"] = DEFINITION + f"Of log10 f(N, X) at z = {z:g}."
    return table


def _add_shares(table: Table, found: Information, gradient: Array, values: Array) -> None:
    linear, data, prior = found.shares(gradient)
    with np.errstate(invalid="ignore"):
        lo, hi = np.quantile(values, (0.16, 0.84), axis=0)
        table["sigma"] = 0.5 * (hi - lo)
    table["sigma_linear"] = linear
    table["share_prior"] = prior
    for name, column in zip(found.names, data.T, strict=True):
        table[f"share_{name}"] = column


def _by_dataset(posterior: Posterior, found: Information) -> Table:
    table = Table()
    table["dataset"] = [*found.names, "prior"]
    rows = [data.n_listed for data in posterior.response.datasets]
    table["n_rows"] = [*rows, 0]
    table["n_constrained"] = [*found.n_constrained, found.n_prior]
    table.meta["definition"] = (
        "n_constrained: effective number of parameters that a data set fixes, tr(C F); what is "
        f"left to the prior stands in the last row; together {posterior.n_dim} parameters."
    )
    return table
