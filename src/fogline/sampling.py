"""One ensemble of an analysis, from its response to its file."""

from __future__ import annotations

from pathlib import Path
from typing import TextIO

from fogline.ensemble import run_ensemble
from fogline.progress import progress_for
from fogline.provenance import code_hash, settings_hash
from fogline.response_file import Fit


def sample_ensemble(
    fit: Fit, index: int, *, output: str | Path, checkpoints: str | Path, log: TextIO
) -> None:
    """Sample one ensemble, resuming from its checkpoint where there is one.

    Parameters
    ----------
    fit : Fit
    index : int
        Which ensemble.
    output : path-like
        File of the ensemble.
    checkpoints : path-like
        Folder of checkpoints. Their names carry the hash of data, model, code and sampler settings,
        so that a stale chain is never resumed; the file goes once the ensemble is complete.
    log : text stream
    """
    posterior = fit.posterior
    code = code_hash("fogline.ensemble")
    fingerprint = settings_hash(fit.fingerprint, fit.analysis.sampler, code)
    checkpoint = Path(checkpoints) / f"{index}-{fingerprint}.h5"
    checkpoint.parent.mkdir(parents=True, exist_ok=True)
    progress = progress_for(f"{fit.analysis.name}, ensemble {index}", log=log)
    result = run_ensemble(
        posterior.ln_prob,
        posterior.n_dim,
        fit.analysis.sampler,
        index,
        checkpoint,
        fingerprint,
        progress,
    )
    result.save(Path(output))
    checkpoint.unlink(missing_ok=True)
