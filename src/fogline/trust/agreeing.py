"""Sampler agreement of an analysis, from files to files."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path
from typing import Final

import h5py
import numpy as np
from numpy.typing import NDArray

from fogline.chains import EnsembleResult
from fogline.deriving import make_draws
from fogline.figures import save
from fogline.figures.agreement import draw_agreement
from fogline.headlines import headline_draws
from fogline.response_file import Fit
from fogline.tables import write_table, write_whole
from fogline.trust.agreement import REFERENCE, Sample, agreement_table
from fogline.trust.nested import nested
from fogline.trust.tempering import POPULATIONS, LnLikelihood, temper

Array = NDArray[np.float64]

TEMPERED: Final = "tempered"
NESTED: Final = "nested"

BLOCKS: Final = 8
"""Groups of walkers of an ensemble, and random parts of a nested run."""

MOST_DRAWS: Final = 2000
"""Draws of a block, at most: derived quantities of each take time."""

STREAM: Final = 1_000_151
"""Spawn key of the random streams."""


def ln_likelihood_of(fit: Fit) -> LnLikelihood:
    """Return ln p(data | x) in sampling coordinates, as ensembles see it."""
    posterior = fit.posterior

    def ln_likelihood(x: Array) -> Array:
        return posterior.ln_prob(x) - posterior.prior.ln_density(x)

    return ln_likelihood


def write_tempered(fit: Fit, output: str | Path) -> None:
    """Lead `POPULATIONS` populations from the prior to the posterior and write them.

    Parameters
    ----------
    fit : Fit
    output : path-like
        HDF5 file.
    """
    ln_likelihood = ln_likelihood_of(fit)
    made = [
        temper(ln_likelihood, fit.prior.n_dim, _rng(fit, TEMPERED, number))
        for number in range(POPULATIONS)
    ]
    ln_z = np.array([population.ln_z for population in made])
    error = float(ln_z.std(ddof=1) / np.sqrt(len(ln_z)))
    _save(output, [population.x for population in made], float(ln_z.mean()), error)


def write_nested(fit: Fit, run: int, output: str | Path) -> None:
    """Make one nested run and write its draws; parameters as in `write_tempered`."""
    rng = _rng(fit, NESTED, run)
    made = nested(ln_likelihood_of(fit), fit.prior.n_dim, rng)
    order = rng.permutation(len(made.x))
    _save(output, [made.x[part] for part in np.array_split(order, BLOCKS)], made.ln_z, made.error)


def write_agreement(
    fit: Fit,
    ensembles: Sequence[str | Path],
    convergence: str | Path,
    others: Sequence[str | Path],
    *,
    table: str | Path,
    figure: str | Path,
) -> None:
    """Compare the ensembles with other samplers.

    Parameters
    ----------
    fit : Fit
    ensembles : sequence of path-like
        Files of the ensembles.
    convergence : path-like
        ``convergence.json``, which holds the evidence.
    others : sequence of path-like
        Files of `write_tempered` and `write_nested`, named after the sampler.
    table, figure : path-like
        ECSV file; figure without suffix.
    """
    evidence = json.loads(Path(convergence).read_text(encoding="utf-8"))["evidence"]
    parts = [
        part.reshape(-1, part.shape[-1])
        for path in ensembles
        for part in np.array_split(EnsembleResult.load(Path(path)).chain, BLOCKS, axis=1)
    ]
    blocks = tuple(_quantities(fit, part) for part in parts)
    runs: dict[str, list[Sample]] = {
        REFERENCE: [Sample(blocks, float(evidence["ln_z"]), float(evidence["error"]))]
    }
    for path in others:
        sampler = Path(path).stem.split("_")[0]
        runs.setdefault(sampler, []).append(_load(fit, path))
    names = _names(fit)
    made = agreement_table(runs, names)
    write_table(made, table, **fit.table_meta())
    save(draw_agreement(made), figure)


def _names(fit: Fit) -> tuple[str, ...]:
    theta = fit.prior.to_parameters(np.zeros((1, fit.prior.n_dim)))
    return (*fit.prior.names, *headline_draws(make_draws(theta, fit.setting, fit.analysis)).keys)


def _quantities(fit: Fit, x: Array) -> Array:
    """Return parameters and headline quantities of draws, thinned, shape (n, n_quantities)."""
    kept = x[np.linspace(0, len(x) - 1, min(MOST_DRAWS, len(x))).astype(int)]
    theta = fit.prior.to_parameters(kept)
    headlines = headline_draws(make_draws(theta, fit.setting, fit.analysis))
    return np.concatenate([theta, headlines.values], axis=1)


def _save(path: str | Path, blocks: Sequence[Array], ln_z: float, error: float) -> None:
    def write(temporary: Path) -> None:
        with h5py.File(temporary, "w") as file:
            file.attrs["ln_z"], file.attrs["error"] = ln_z, error
            for number, block in enumerate(blocks):
                file[f"blocks/{number:03d}"] = block

    write_whole(path, write)


def _load(fit: Fit, path: str | Path) -> Sample:
    with h5py.File(path, "r") as file:
        blocks = [file["blocks"][name][()] for name in sorted(file["blocks"])]
        ln_z, error = float(file.attrs["ln_z"]), float(file.attrs["error"])
    return Sample(tuple(_quantities(fit, block) for block in blocks), ln_z, error)


def _rng(fit: Fit, sampler: str, number: int) -> np.random.Generator:
    key = (STREAM, *sampler.encode(), number)
    return np.random.default_rng(np.random.SeedSequence(fit.analysis.sampler.seed, spawn_key=key))
