"""The posterior as a NetCDF file in the ArviZ schema, and draws read back from it.

Groups: ``posterior`` (``log_f`` over pivots, ``evolution`` over evolution pivots and, where there
are breaks, redshift segments; one variable for every other parameter), ``sample_stats`` (``lp``,
and the sampling coordinates), ``log_likelihood``, ``posterior_predictive`` and
``observed_data`` with one variable per data set. A *chain* is an ensemble; its draws run walker by
walker, each walker's steps in order, so that autocorrelation within a chain is that of its walkers.
At most `MAX_DRAWS` draws an ensemble are kept, evenly thinned.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any, Final

import arviz_base
import numpy as np
import xarray
from numpy.typing import NDArray

from fogline.response_file import Fit
from fogline.tables import write_whole

Array = NDArray[np.float64]

MAX_DRAWS = 8192
ENGINE: Final = "h5netcdf"


def write_posterior(path: str | Path, fit: Fit, chains: Array, rng: np.random.Generator) -> None:
    """Write the posterior file of an analysis.

    Parameters
    ----------
    path : path-like
    fit : Fit
    chains : ndarray, shape (n_ensembles, n_stored, n_walkers, n_dim)
        In unit-normal coordinates.
    rng : numpy.random.Generator
        Draws the replicates.
    """
    x = thinned(chains)
    theta = fit.prior.to_parameters(x.reshape(-1, x.shape[-1])).reshape(x.shape)
    distribution = fit.response.distribution
    segments = ["segment"] if distribution.breaks else []
    coords: dict[str, Any] = {
        "pivot": np.array(distribution.pivots),
        "evolution_pivot": np.array(distribution.evolution_pivots),
        "coordinate": list(fit.prior.coordinate_names),
    }
    if segments:
        coords["segment"] = list(distribution.segments)
    tree = arviz_base.from_dict(
        {
            "posterior": _variables(fit, theta),
            "sample_stats": _sample_stats(fit, x),
            **_row_groups(fit, theta, rng),
        },
        dims={
            "log_f": ["pivot"],
            "evolution": [*segments, "evolution_pivot"],
            "x": ["coordinate"],
        }
        | {data.name: [f"{data.name}_row"] for data in fit.response.datasets},
        coords=coords,
    )
    tree.attrs.update({key: str(value) for key, value in fit.table_meta().items()})
    write_whole(path, lambda temporary: tree.to_netcdf(str(temporary), engine=ENGINE))


def _variables(fit: Fit, theta: Array) -> dict[str, Array]:
    """Return the parameters by variable, each of shape (n_ensembles, n_draws, ...)."""
    distribution = fit.response.distribution
    n_pivots, n_exponents, _ = distribution.shape
    exponents = theta[..., n_pivots : n_pivots + n_exponents]
    if distribution.breaks:
        n_segments = len(distribution.segments)
        exponents = exponents.reshape(*theta.shape[:2], n_segments, -1)
    variables = {"log_f": theta[..., :n_pivots], "evolution": exponents}
    others = fit.prior.names[n_pivots + n_exponents :]
    return variables | {
        name: theta[..., column] for column, name in enumerate(others, n_pivots + n_exponents)
    }


def _sample_stats(fit: Fit, x: Array) -> dict[str, Array]:
    lp = fit.posterior.ln_prob(x.reshape(-1, x.shape[-1])).reshape(x.shape[:2])
    return {"lp": lp, "x": x.astype(np.float32)}


def _row_groups(fit: Fit, theta: Array, rng: np.random.Generator) -> dict[str, dict[str, Array]]:
    """Return the groups with one variable per data set."""
    likelihood = fit.posterior.likelihood
    predicted = fit.response.predict(theta.reshape(-1, theta.shape[-1]))
    nuisances = theta.reshape(-1, theta.shape[-1])[:, fit.response.n_parameters :]
    drawn = likelihood.in_file_space(likelihood.replicate(predicted, rng, nuisances))
    ln_rows = likelihood.ln_rows(predicted, nuisances)
    groups: dict[str, dict[str, Array]] = {
        "log_likelihood": {},
        "posterior_predictive": {},
        "observed_data": {},
    }
    for data, rows in zip(fit.response.datasets, fit.response.slices, strict=True):
        ln_p, replicates = ln_rows[:, rows], drawn[:, rows][:, data.visible]
        if data.role is not None:  # a list of absorbers has one likelihood, not one a row
            ln_p = ln_p.sum(axis=1, keepdims=True)
        shape = (*theta.shape[:2], -1)
        groups["log_likelihood"][data.name] = ln_p.reshape(shape).astype(np.float32)
        groups["posterior_predictive"][data.name] = replicates.reshape(shape).astype(np.float32)
        groups["observed_data"][data.name] = data.observed[data.visible]
    return groups


def thinned(chains: Array) -> Array:
    """Return draws walker by walker, shape (n_ensembles, n_draws, n_dim), at most `MAX_DRAWS`."""
    n_ensembles, n_stored, n_walkers, n_dim = chains.shape
    every = -(-n_stored * n_walkers // MAX_DRAWS)
    # Counted from the end, so that the latest draw is always kept.
    kept = chains[:, ::-1][:, ::every][:, ::-1]
    return kept.swapaxes(1, 2).reshape(n_ensembles, -1, n_dim)


def read_draws(path: str | Path, n_draws: int) -> Array:
    """Read parameter vectors from a posterior file, evenly spread over ensembles and walkers.

    Parameters
    ----------
    path : path-like
    n_draws : int
        At most this many.

    Returns
    -------
    ndarray, shape (n, n_parameters)
    """
    with xarray.open_dataset(path, group="posterior", engine=ENGINE) as posterior:
        others = [name for name in posterior.data_vars if name not in ("log_f", "evolution")]
        arrays = [posterior[name].to_numpy() for name in ("log_f", "evolution", *others)]
    return _spread(arrays, n_draws)


def read_coordinates(path: str | Path, n_draws: int) -> Array:
    """Read the sampling coordinates of the draws that `read_draws` returns.

    Parameters
    ----------
    path : path-like
    n_draws : int
        At most this many.

    Returns
    -------
    ndarray, shape (n, n_dim)
        To single precision.
    """
    with xarray.open_dataset(path, group="sample_stats", engine=ENGINE) as stats:
        return _spread([stats["x"].to_numpy().astype(float)], n_draws)


def _spread(arrays: list[Array], n_draws: int) -> Array:
    """Return draws of arrays (n_chains, n_draws, ...) side by side, evenly spread."""
    n_draws_in_all = arrays[0].shape[0] * arrays[0].shape[1]
    flat = np.concatenate([array.reshape(n_draws_in_all, -1) for array in arrays], axis=1)
    return flat[np.linspace(0, len(flat) - 1, min(n_draws, len(flat))).astype(int)]
