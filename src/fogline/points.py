"""Parameter vectors that users write: ``log_f`` at the pivots and the evolution exponents."""

from __future__ import annotations

import os
from collections.abc import Sequence
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fogline.cosmology_keys import is_number, text_number_hint
from fogline.faults import Fault, InputError, nearest
from fogline.settings import ModelSettings
from fogline.yaml_lines import Document, read_yaml

_HOLDS: Final = {
    "log_f": "log10 f at the reference redshift, one number for each of the pivots",
    "evolution": "exponents, one number for each of the evolution pivots",
}


def read_point(path: str | os.PathLike[str], model: ModelSettings) -> NDArray[np.float64]:
    """Return the parameter vector that a YAML file holds.

    Parameters
    ----------
    path : path-like
        YAML file with the keys ``log_f`` and ``evolution``.
    model : ModelSettings
        Says how many numbers there must be.

    Returns
    -------
    ndarray, shape (n_pivots + n_evolution_pivots,)
        log10 f [dex of cm^2] at the reference redshift, then the exponents.

    Raises
    ------
    InputError
        With every fault of the file.
    """
    document = read_yaml(path)
    check = _PointCheck(os.fspath(path), document)
    log_f = check.numbers("log_f", model.pivots)
    evolution = check.numbers("evolution", model.evolution.pivots)
    if check.faults:
        raise InputError(check.faults)
    return np.array([*log_f, *evolution], dtype=float)


class _PointCheck:
    """The single checks of `read_point`; each gathers its faults."""

    def __init__(self, path: str, document: Document) -> None:
        self.faults: list[Fault] = []
        self._path = path
        self._document = document
        self._found: dict[str, Any] = {}
        if isinstance(document.value, dict):
            self._found = document.value
        for key in self._found:
            if key not in _HOLDS:
                self._fault(f"unknown key '{key}'; {nearest(key, _HOLDS)}", key)

    def _fault(self, what: str, *place: str | int) -> None:
        self.faults.append(Fault(self._path, self._document.line(place), what))

    def numbers(self, key: str, pivots: Sequence[float]) -> list[float]:
        if key not in self._found:
            self._fault(f"lacks '{key}' ({_HOLDS[key]}, {len(pivots)} here)")
            return []
        found = self._found[key]
        if not isinstance(found, list):
            self._fault(f"{key} is {found!r}, must be a list: {_HOLDS[key]}", key)
            return []
        if len(found) != len(pivots):
            at = ", ".join(f"{pivot:g}" for pivot in pivots)
            what = f"{key} lists {len(found)} numbers, must be {len(pivots)}: one for each of {at}"
            self._fault(what, key)
        for i, item in enumerate(found):
            if not is_number(item):
                hint = text_number_hint(item)
                self._fault(f"{key}[{i}] is {item!r}, must be a finite number{hint}", key, i)
        return [float(item) for item in found if is_number(item)]
