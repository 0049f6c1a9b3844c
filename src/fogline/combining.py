"""Ensembles of one analysis brought together: verdict, posterior file, table of parameters."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path
from typing import TextIO

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

from fogline.chains import EnsembleResult
from fogline.convergence import ConvergenceReport, aligned, assess
from fogline.posterior_file import write_posterior
from fogline.response_file import Fit
from fogline.tables import bands, write_table, write_whole

Array = NDArray[np.float64]

PREDICTIVE_STREAM = 1_000_003
"""Spawn key of the random stream of replicates: apart from those of the ensembles."""


def combine_ensembles(
    fit: Fit,
    results: Sequence[EnsembleResult],
    *,
    posterior: str | Path,
    convergence: str | Path,
    parameters: str | Path,
    log: TextIO,
) -> None:
    """Judge the ensembles of an analysis and write what they say together.

    Parameters
    ----------
    fit : Fit
    results : sequence of EnsembleResult
    posterior, convergence, parameters : path-like
        Files to write: ``posterior.nc``, ``convergence.json``, ``parameters.ecsv``.
    log : text stream
        Takes the verdict in words.
    """
    prior = fit.prior
    report = assess(
        results,
        fit.analysis.sampler,
        prior.names,
        coordinates=prior.coordinate_names,
        to_parameters=prior.to_parameters,
    )
    print(verdict(fit.analysis.name, report), file=log)
    chains = aligned(results)
    write_posterior(posterior, fit, chains, replicate_rng(fit))
    theta = prior.to_parameters(chains.reshape(-1, chains.shape[-1]))
    write_table(parameter_table(theta, report), parameters, **fit.table_meta())
    text = json.dumps(report.as_dict() | {"analysis": fit.analysis.name}, indent=2)
    write_whole(convergence, lambda temporary: temporary.write_text(text + "\n", encoding="utf-8"))


def replicate_rng(fit: Fit) -> np.random.Generator:
    """Return the generator of an analysis' replicates, fixed by its seed."""
    seed = np.random.SeedSequence(fit.analysis.sampler.seed, spawn_key=(PREDICTIVE_STREAM,))
    return np.random.default_rng(seed)


def verdict(name: str, report: ConvergenceReport) -> str:
    """Return the verdict of an analysis in words, one finding a line."""
    head = f"{name}: {'converged' if report.converged else 'NOT CONVERGED'}"
    return "\n".join([head, *(f"{name}: {why}" for why in (*report.reasons, *report.notes))])


def parameter_table(theta: Array, report: ConvergenceReport) -> Table:
    """Return name, bands and diagnostics of every parameter.

    Parameters
    ----------
    theta : ndarray, shape (n_draws, n_parameters)
    report : ConvergenceReport
        Of the same parameters.
    """
    table = Table()
    table["name"] = [parameter.name for parameter in report.parameters]
    for band, values in bands(theta).items():
        table[band] = values
    for name in ("rhat", "ess_bulk", "ess_tail"):
        table[name] = [float(getattr(parameter, name)) for parameter in report.parameters]
    table.meta["definition"] = (
        "log_f[p]: log10 of f(N_HI, X) in cm^2 at log N = p and the reference redshift; "
        "evolution[p]: exponent of (1+z) at log N = p; doppler: km/s; scale[d]: factor on the "
        "predictions of data set d; scatter[d]: added to its errors in quadrature, in their unit."
    )
    table.meta["converged"] = report.converged
    return table
