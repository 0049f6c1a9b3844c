"""Fits of other data with the same model, made in memory.

A refit is sampled as the analysis itself is (`fogline.ensemble`), its ensembles one after the
other, and judged by the same criteria. It needs fewer effective samples: what is read off it are
medians and widths of predictions.
"""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.convergence import aligned, assess
from fogline.ensemble import run_ensemble
from fogline.posterior import Posterior
from fogline.response import Response
from fogline.response_file import Fit
from fogline.settings import SamplerSettings

Array = NDArray[np.float64]

TARGET_ESS: Final = 1500
"""Effective samples of a refit, at most those that the analysis itself asks for."""

PRIOR_DRAWS: Final = 8000
"""Draws where there are no data: the prior is sampled directly."""


@dataclass(frozen=True)
class Refit:
    """Draws of a posterior.

    Parameters
    ----------
    x, theta : ndarray, shape (n_draws, n_dim)
        In sampling coordinates and as parameters.
    converged : bool
    reasons : tuple of str
        What is wrong where it has not converged.
    """

    x: Array
    theta: Array
    converged: bool
    reasons: tuple[str, ...]


def subset(fit: Fit, names: Collection[str]) -> Fit:
    """Return a fit with some of its data sets only.

    Parameters
    ----------
    fit : Fit
    names : collection of str
        Data sets to keep; their order is that of the fit.
    """
    response = fit.response
    kept = [i for i, data in enumerate(response.datasets) if data.name in names]
    few = replace(
        response,
        datasets=tuple(response.datasets[i] for i in kept),
        blocks=tuple(response.blocks[i] for i in kept),
    )
    return replace(fit, response=few)


def refit(fit: Fit) -> Refit:
    """Sample the posterior of a fit.

    Parameters
    ----------
    fit : Fit
        With any number of data sets; without any its posterior is the prior.
    """
    if not fit.response.datasets:
        rng = np.random.default_rng(fit.analysis.sampler.seed)
        x = rng.standard_normal((PRIOR_DRAWS, fit.prior.n_dim))
        return Refit(x, fit.prior.to_parameters(x), True, ())
    return sample(fit.posterior, fit.analysis.sampler)


def sample(posterior: Posterior, settings: SamplerSettings) -> Refit:
    """Sample a posterior with the ensembles of some settings.

    Parameters
    ----------
    posterior : Posterior
    settings : SamplerSettings
    """
    settings = replace(settings, target_ess=min(settings.target_ess, TARGET_ESS))
    results = [
        run_ensemble(posterior.ln_prob, posterior.n_dim, settings, index)
        for index in range(settings.ensembles)
    ]
    prior = posterior.prior
    report = assess(
        results,
        settings,
        prior.names,
        coordinates=prior.coordinate_names,
        to_parameters=prior.to_parameters,
    )
    chains = aligned(results)
    x = chains.reshape(-1, chains.shape[-1])
    return Refit(x, prior.to_parameters(x), report.converged, tuple(report.reasons))


def with_nuisances_from_prior(theta: Array, fit: Fit, rng: np.random.Generator) -> Array:
    """Return parameters for a fit whose nuisance parameters nothing has constrained.

    Parameters
    ----------
    theta : ndarray, shape (n_draws, n)
        Draws of a fit with the same model; those of f come first.
    fit : Fit
        The data sets that are predicted.
    rng : numpy.random.Generator
    """
    n_model = fit.response.n_parameters
    x = rng.standard_normal((len(theta), fit.prior.n_dim))
    nuisances = fit.prior.to_parameters(x)[:, n_model:]
    return np.concatenate([theta[:, :n_model], nuisances], axis=1)


def nuisances_within(fit: Fit, part: Response) -> NDArray[np.int64]:
    """Return the columns of a fit's parameters that a part of its data sets has, shape (n,)."""
    names = {data.name for data in part.datasets}
    n_model = fit.response.n_parameters
    own = [
        n_model + i for i, nuisance in enumerate(fit.prior.nuisances) if nuisance.dataset in names
    ]
    return np.array([*range(n_model), *own], dtype=np.int64)
