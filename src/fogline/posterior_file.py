"""The posterior as a NetCDF file in the ArviZ schema, and draws read back from it.

Groups: ``posterior`` (``log_f`` over pivots, ``evolution`` over evolution pivots), ``sample_stats``
(``lp``, and the sampling coordinates), ``log_likelihood``, ``posterior_predictive`` and
``observed_data`` with one variable per data set. A *chain* is an ensemble; its draws run walker by
walker, each walker's steps in order, so that autocorrelation within a chain is that of its walkers.
At most `MAX_DRAWS` draws an ensemble are kept, evenly thinned.
"""

from __future__ import annotations

from pathlib import Path
from typing import Final

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
    n_pivots = len(fit.analysis.model.pivots)
    theta = fit.posterior.prior.to_parameters(x.reshape(-1, x.shape[-1])).reshape(x.shape)
    tree = arviz_base.from_dict(
        {
            "posterior": {"log_f": theta[..., :n_pivots], "evolution": theta[..., n_pivots:]},
            "sample_stats": _sample_stats(fit, x),
            **_row_groups(fit, theta, rng),
        },
        dims={"log_f": ["pivot"], "evolution": ["evolution_pivot"], "x": ["coordinate"]}
        | {data.name: [f"{data.name}_row"] for data in fit.response.datasets},
        coords={
            "pivot": np.array(fit.analysis.model.pivots),
            "evolution_pivot": np.array(fit.analysis.model.evolution.pivots),
            "coordinate": list(fit.posterior.prior.coordinate_names),
        },
    )
    tree.attrs.update({key: str(value) for key, value in fit.table_meta().items()})
    write_whole(path, lambda temporary: tree.to_netcdf(str(temporary), engine=ENGINE))


def _sample_stats(fit: Fit, x: Array) -> dict[str, Array]:
    lp = fit.posterior.ln_prob(x.reshape(-1, x.shape[-1])).reshape(x.shape[:2])
    return {"lp": lp, "x": x.astype(np.float32)}


def _row_groups(fit: Fit, theta: Array, rng: np.random.Generator) -> dict[str, dict[str, Array]]:
    """Return the groups with one variable per data set."""
    likelihood = fit.posterior.likelihood
    predicted = fit.response.predict(theta.reshape(-1, theta.shape[-1]))
    drawn = likelihood.in_file_space(likelihood.replicate(predicted, rng))
    ln_rows = likelihood.ln_rows(predicted)
    groups: dict[str, dict[str, Array]] = {
        "log_likelihood": {},
        "posterior_predictive": {},
        "observed_data": {},
    }
    for data, rows in zip(fit.response.datasets, fit.response.slices, strict=True):
        shape = (*theta.shape[:2], data.n_rows)
        groups["log_likelihood"][data.name] = ln_rows[:, rows].reshape(shape).astype(np.float32)
        groups["posterior_predictive"][data.name] = drawn[:, rows].reshape(shape).astype(np.float32)
        groups["observed_data"][data.name] = data.observed
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
        theta = np.concatenate(
            [posterior["log_f"].to_numpy(), posterior["evolution"].to_numpy()], axis=-1
        )
    flat = theta.reshape(-1, theta.shape[-1])
    return flat[np.linspace(0, len(flat) - 1, min(n_draws, len(flat))).astype(int)]
