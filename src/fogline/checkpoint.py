"""Checkpoints of an ensemble: everything that the rest of its run depends on, in one HDF5 file.

Files appear whole or not at all: each is written under a name of its own in the same folder and
then put in place by `os.replace`, so that a kill at any instant, or two writers at once, leave
either the former file or the new one. Nothing is pickled.
"""

from __future__ import annotations

import os
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Final

import h5py
import numpy as np
from numpy.typing import NDArray

from fogline.mixture import StudentMixture
from fogline.moves import Tally

Array = NDArray[np.float64]

FORMAT: Final = 2
"""Raised when the content changes; files of another format are not resumed."""

CHECKPOINT_SECONDS: Final = 1.0
"""Least time between two checkpoints; which blocks leave one does not change the result."""

STALE_SECONDS: Final = 3600.0
"""Age at which a temporary file that a killed writer left behind is removed."""


@dataclass
class RunState:
    """Where an ensemble stands, always at the end of a block of steps.

    Attributes
    ----------
    round : int
        Warm-up round, from 0; the number of all rounds while samples count.
    step : int
        Steps done in this round.
    coords : ndarray, shape (n_walkers, n_dim)
        Positions.
    ln_prob : ndarray, shape (n_walkers,)
        Their ln posterior.
    random_state : tuple
        As ``numpy.random.RandomState.get_state()`` gives it.
    thin : int
        Steps between stored draws.
    mixture : StudentMixture or None
        Proposal of the independence move; none in the first round.
    chain : ndarray, shape (n_stored, n_walkers, n_dim)
        Draws of this round.
    chain_ln_prob : ndarray, shape (n_stored, n_walkers)
        Their ln posterior.
    tallies : dict of str to Tally
        Acceptance of each move in this round.
    history : ndarray, shape (n_checks, 6)
        Columns of `fogline.chains.HISTORY`.
    warm_up : int
        Steps of the rounds that are done.
    """

    round: int
    step: int
    coords: Array
    ln_prob: Array
    random_state: Any
    thin: int
    mixture: StudentMixture | None
    chain: Array
    chain_ln_prob: Array
    tallies: dict[str, Tally]
    history: Array = field(default_factory=lambda: np.empty((0, 6)))
    warm_up: int = 0


@contextmanager
def replacing(path: Path) -> Iterator[h5py.File]:
    """Open a new HDF5 file that takes the place of `path` once it is written in full.

    Parameters
    ----------
    path : Path
        Its folder is made if need be.

    Yields
    ------
    h5py.File
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, name = tempfile.mkstemp(prefix=f".{path.name}.", suffix=".tmp", dir=path.parent)
    os.close(handle)
    try:
        with h5py.File(name, "w") as file:
            yield file
        os.chmod(name, 0o644)  # mkstemp makes files that only their owner reads
        os.replace(name, path)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise


def save_mixture(group: h5py.Group, mixture: StudentMixture | None) -> None:
    """Write a mixture into an HDF5 group; nothing for None."""
    if mixture is not None:
        group.attrs["dof"] = mixture.dof
        for name in ("weights", "means", "factors"):
            group[name] = getattr(mixture, name)


def load_mixture(group: h5py.Group) -> StudentMixture | None:
    """Read what `save_mixture` wrote."""
    if "weights" not in group:
        return None
    weights, means, factors = (group[name][()] for name in ("weights", "means", "factors"))
    return StudentMixture(weights, means, factors, float(group.attrs["dof"]))


def save_checkpoint(path: Path, state: RunState, fingerprint: str) -> None:
    """Write a checkpoint in place of the former one.

    Parameters
    ----------
    path : Path
        The file.
    state : RunState
        At the end of a block.
    fingerprint : str
        Of everything that the run depends on: data, model, settings, ensemble.
    """
    remove_leftovers(path)
    with replacing(path) as file:
        file.attrs.update(
            format=FORMAT,
            fingerprint=fingerprint,
            round=state.round,
            step=state.step,
            thin=state.thin,
            warm_up=state.warm_up,
        )
        for name in ("coords", "ln_prob", "chain", "chain_ln_prob", "history"):
            file[name] = getattr(state, name)
        _save_random_state(file.create_group("random_state"), state.random_state)
        save_mixture(file.create_group("mixture"), state.mixture)
        for move, tally in state.tallies.items():
            file[f"tallies/{move}"] = tally.accepted
            file[f"tallies/{move}"].attrs["n_proposed"] = tally.n_proposed


def load_checkpoint(path: Path, fingerprint: str) -> tuple[RunState | None, str]:
    """Read a checkpoint where it belongs to this run.

    Parameters
    ----------
    path : Path
        May not exist.
    fingerprint : str
        The run's own.

    Returns
    -------
    RunState or None
        None where there is nothing to resume.
    str
        Why a file that is there was left aside; empty otherwise.
    """
    if not path.exists():
        return None, ""
    try:
        with h5py.File(path, "r") as file:
            if int(file.attrs["format"]) != FORMAT or file.attrs["fingerprint"] != fingerprint:
                return None, f"{path} belongs to other data or settings: starting anew"
            return _load_state(file), ""
    except (OSError, KeyError, ValueError) as error:
        return None, f"{path} cannot be read ({error}): starting anew"


def _load_state(file: h5py.File) -> RunState:
    arrays = ("coords", "ln_prob", "chain", "chain_ln_prob", "history")
    return RunState(
        round=int(file.attrs["round"]),
        step=int(file.attrs["step"]),
        thin=int(file.attrs["thin"]),
        warm_up=int(file.attrs["warm_up"]),
        random_state=_load_random_state(file["random_state"]),
        mixture=load_mixture(file["mixture"]),
        tallies={move: _load_tally(data) for move, data in file["tallies"].items()},
        **{name: file[name][()] for name in arrays},
    )


def _load_tally(data: h5py.Dataset) -> Tally:
    tally = Tally(len(data))
    tally.n_proposed, tally.accepted = int(data.attrs["n_proposed"]), data[()]
    return tally


def _save_random_state(group: h5py.Group, state: Any) -> None:
    kind, key, position, has_gauss, gauss = state
    group.attrs.update(kind=kind, position=position, has_gauss=has_gauss, gauss=gauss)
    group["key"] = key


def _load_random_state(group: h5py.Group) -> tuple[Any, ...]:
    a = group.attrs
    return (
        str(a["kind"]),
        group["key"][()],
        int(a["position"]),
        int(a["has_gauss"]),
        float(a["gauss"]),
    )


def remove_leftovers(path: Path) -> None:
    """Remove what writers of `path` that were killed long ago left behind."""
    for old in path.parent.glob(f".{path.name}.*.tmp"):
        try:
            if time.time() - old.stat().st_mtime > STALE_SECONDS:
                old.unlink()
        except FileNotFoundError:
            continue  # another writer was quicker


class Keeper:
    """Where a run leaves its checkpoints, and how often."""

    def __init__(self, path: Path | None, fingerprint: str) -> None:
        self.path = path
        self.fingerprint = fingerprint
        self._saved = time.monotonic()

    def load(self) -> tuple[RunState | None, str]:
        """Return the state to resume from, if any, and why a file was left aside."""
        return load_checkpoint(self.path, self.fingerprint) if self.path else (None, "")

    def save(self, state: RunState) -> None:
        """Write a checkpoint unless the last one is fresh."""
        if self.path and time.monotonic() - self._saved > CHECKPOINT_SECONDS:
            save_checkpoint(self.path, state, self.fingerprint)
            self._saved = time.monotonic()
