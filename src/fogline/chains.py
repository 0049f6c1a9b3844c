"""`EnsembleResult`: what one ensemble leaves behind, and its file."""

from __future__ import annotations

from dataclasses import dataclass, fields
from pathlib import Path
from typing import Any, Final

import h5py
import numpy as np
from numpy.typing import NDArray

from fogline.checkpoint import load_mixture, replacing, save_mixture
from fogline.evidence import Importance
from fogline.mixture import StudentMixture

Array = NDArray[np.float64]

HISTORY: Final = ("steps", "autocorrelation", "rhat", "ess_bulk", "ess_tail", "stuck")
"""Columns of the history; the last four are NaN where a check did not need them."""

_ARRAYS: Final = ("chain", "ln_prob", "walker_acceptance", "history")
_INTEGERS: Final = ("steps", "thin", "warm_up", "seed", "index")
_IMPORTANCE: Final = fields(Importance)


@dataclass(frozen=True)
class EnsembleResult:
    """Counted samples of one ensemble, and how they came about.

    Parameters
    ----------
    chain : ndarray, shape (n_stored, n_walkers, n_dim)
        Draws after the warm-up.
    ln_prob : ndarray, shape (n_stored, n_walkers)
        Their ln posterior.
    steps : int
        Counted steps; ``steps / thin`` of them are stored.
    thin : int
        Steps between stored draws. Doubled where a long chain would not fit its file.
    warm_up : int
        Steps before.
    acceptance : dict of str to float
        Share of proposals taken, per move.
    walker_acceptance : ndarray, shape (n_walkers,)
        Share of proposals that each walker took.
    mixture : StudentMixture
        Proposal of the independence move, frozen before the first counted step.
    history : ndarray, shape (n_checks, 6)
        Columns of `HISTORY`.
    stopped : bool
        Whether the ensemble met its own target; else it ran into the step limit.
    reason : str
        Why it ended, in words.
    seed : int
        Seed of the analysis.
    index : int
        Which stream of that seed.
    importance : Importance
        Evidence and moments from the mixture.
    """

    chain: Array
    ln_prob: Array
    steps: int
    thin: int
    warm_up: int
    acceptance: dict[str, float]
    walker_acceptance: Array
    mixture: StudentMixture
    history: Array
    stopped: bool
    reason: str
    seed: int
    index: int
    importance: Importance

    @property
    def samples(self) -> Array:
        """All draws, shape (n_stored * n_walkers, n_dim)."""
        return self.chain.reshape(-1, self.chain.shape[2])

    def save(self, path: Path) -> None:
        """Write everything to one HDF5 file, whole or not at all."""
        with replacing(path) as file:
            for name in _ARRAYS:
                file[name] = getattr(self, name)
            for name in (*_INTEGERS, "stopped", "reason"):
                file.attrs[name] = getattr(self, name)
            file.create_group("acceptance").attrs.update(self.acceptance)
            save_mixture(file.create_group("mixture"), self.mixture)
            group = file.create_group("importance")
            group.attrs.update({f.name: getattr(self.importance, f.name) for f in _IMPORTANCE})

    @classmethod
    def load(cls, path: Path) -> EnsembleResult:
        """Read what `save` wrote.

        Raises
        ------
        OSError
            If there is no such file, or it is not HDF5.
        """
        with h5py.File(path, "r") as file:
            mixture = load_mixture(file["mixture"])
            assert mixture is not None
            values: dict[str, Any] = {name: file[name][()] for name in _ARRAYS}
            values |= {name: int(file.attrs[name]) for name in _INTEGERS}
            return cls(
                **values,
                stopped=bool(file.attrs["stopped"]),
                reason=str(file.attrs["reason"]),
                acceptance={k: float(v) for k, v in file["acceptance"].attrs.items()},
                mixture=mixture,
                importance=_load_importance(file["importance"]),
            )


def _load_importance(group: h5py.Group) -> Importance:
    values: dict[str, Any] = {f.name: group.attrs[f.name] for f in _IMPORTANCE}
    values = {k: float(v) if np.ndim(v) == 0 else v for k, v in values.items()}
    return Importance(**values | {"n": int(values["n"])})
