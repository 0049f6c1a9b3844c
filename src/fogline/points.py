"""Parameter vectors that users write: ``log_f`` at the pivots, exponents, and what else is free."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fogline.config_settings import HIGH_COLUMN_PRIORS
from fogline.cosmology_keys import is_number, text_number_hint
from fogline.faults import Fault, InputError, nearest
from fogline.nuisances import NEUTRAL, Nuisance
from fogline.settings import ModelSettings
from fogline.yaml_lines import Document, read_yaml

Array = NDArray[np.float64]

_HOLDS: Final = {
    "log_f": "log10 f at the reference redshift, one number for each of the pivots",
    "evolution": "exponents, one number for each of the evolution pivots",
    "high_column": "parameters of the form of high columns by name",
    "doppler": "the free Doppler argument [km/s]",
    "nuisances": "nuisance parameters by name, such as scale[my_data]; neutral where not given",
}


@dataclass(frozen=True)
class Point:
    """A parameter vector as a file states it.

    Parameters
    ----------
    theta : ndarray, shape (n_parameters,)
        All that predictions depend on: log10 f [dex of cm^2] at the reference redshift, the
        exponents (segment after segment where there are breaks), the shape of the form of high
        columns, the free Doppler argument.
    nuisances : mapping of str to float
        Nuisance parameters that the file states.
    path : str
        The file.
    line : int
        Where it states them.
    """

    theta: Array
    nuisances: Mapping[str, float]
    path: str
    line: int

    def with_nuisances(self, nuisances: Sequence[Nuisance]) -> Array:
        """Return the vector with the nuisance parameters of an analysis.

        Parameters
        ----------
        nuisances : sequence of Nuisance

        Returns
        -------
        ndarray, shape (n_parameters + n_nuisances,)

        Raises
        ------
        InputError
            Where the file states one that the analysis has not.
        """
        known = [nuisance.name for nuisance in nuisances]
        unknown = [name for name in self.nuisances if name not in known]
        if unknown:
            hint = nearest(unknown[0], known) if known else "it has none"
            what = f"the analysis has no nuisance parameter '{unknown[0]}'; {hint}"
            raise InputError([Fault(self.path, self.line, what)])
        values = [self.nuisances.get(n.name, NEUTRAL[n.kind]) for n in nuisances]
        return np.array([*self.theta, *values], dtype=float)


def read_point(path: str | os.PathLike[str], model: ModelSettings) -> Point:
    """Return the parameter vector that a YAML file holds.

    Parameters
    ----------
    path : path-like
        YAML file with the keys ``log_f`` and ``evolution``, and others where the model has more
        parameters.
    model : ModelSettings
        Says how many numbers there must be.

    Returns
    -------
    Point

    Raises
    ------
    InputError
        With every fault of the file.
    """
    document = read_yaml(path)
    high = model.high_column
    free = [key for key, value in model.doppler.items() if isinstance(value, Mapping)]
    wanted = ["log_f", "evolution", *(["high_column"] if high else []), *(free and ["doppler"])]
    check = _PointCheck(os.fspath(path), document, [*wanted, "nuisances"])
    numbers = check.numbers("log_f", model.pivots)
    if model.evolution.breaks:
        numbers += check.lists("evolution", model.evolution.pivots, len(model.evolution.breaks) + 1)
    else:
        numbers += check.numbers("evolution", model.evolution.pivots)
    if high:
        numbers += check.named("high_column", tuple(HIGH_COLUMN_PRIORS[high.form]))
    if free:
        numbers += check.number("doppler")
    nuisances = check.any_names("nuisances")
    if check.faults:
        raise InputError(check.faults)
    line = document.line(("nuisances",))
    return Point(np.array(numbers, dtype=float), nuisances, os.fspath(path), line)


class _PointCheck:
    """The single checks of `read_point`; each gathers its faults."""

    def __init__(self, path: str, document: Document, known: Sequence[str]) -> None:
        self.faults: list[Fault] = []
        self._path = path
        self._document = document
        self._found: dict[str, Any] = {}
        if isinstance(document.value, dict):
            self._found = document.value
        for key in self._found:
            if key not in known:
                self._fault(f"unknown key '{key}'; {nearest(key, known)}", key)

    def _fault(self, what: str, *place: str | int) -> None:
        self.faults.append(Fault(self._path, self._document.line(place), what))

    def numbers(self, key: str, pivots: Sequence[float]) -> list[float]:
        """Return one number for each pivot."""
        if self._lacks(key, f", {len(pivots)} here"):
            return []
        return self._numbers(self._found[key], (key,), pivots)

    def lists(self, key: str, pivots: Sequence[float], n_lists: int) -> list[float]:
        """Return several lists of one number for each pivot, one after the other."""
        if self._lacks(key, f"; {n_lists} such lists here, one for each redshift segment"):
            return []
        found = self._found[key]
        if not isinstance(found, list) or len(found) != n_lists:
            what = f"{key} is {found!r}, must be a list of {n_lists} lists"
            self._fault(f"{what}, one for each redshift segment", key)
            return []
        return [x for i, item in enumerate(found) for x in self._numbers(item, (key, i), pivots)]

    def named(self, key: str, names: Sequence[str]) -> list[float]:
        """Return the numbers of a mapping with these names, in order."""
        if self._lacks(key, f": {', '.join(names)}"):
            return []
        found = self.any_names(key)
        for name in found:
            if name not in names:
                self._fault(f"{key} has no '{name}'; {nearest(name, names)}", key, name)
        for name in names:
            if name not in found:
                self._fault(f"{key} lacks '{name}'", key)
        return [found.get(name, np.nan) for name in names]

    def number(self, key: str) -> list[float]:
        """Return a single number."""
        if self._lacks(key, ""):
            return []
        return [self._number(self._found[key], key)]

    def any_names(self, key: str) -> dict[str, float]:
        """Return a mapping of names to numbers; empty where the file has none."""
        found = self._found.get(key, {})
        if not isinstance(found, Mapping):
            self._fault(f"{key} is {found!r}, must be a mapping: {_HOLDS[key]}", key)
            return {}
        return {str(name): self._number(item, key, str(name)) for name, item in found.items()}

    def _lacks(self, key: str, more: str) -> bool:
        if key in self._found:
            return False
        self._fault(f"lacks '{key}' ({_HOLDS[key]}{more})")
        return True

    def _number(self, item: Any, *place: str | int) -> float:
        if is_number(item):
            return float(item)
        name = str(place[0]) + "".join(f"[{step}]" for step in place[1:])
        hint = text_number_hint(item)
        self._fault(f"{name} is {item!r}, must be a finite number{hint}", *place)
        return float("nan")

    def _numbers(
        self, found: Any, place: tuple[str | int, ...], pivots: Sequence[float]
    ) -> list[float]:
        name = str(place[0]) + "".join(f"[{step}]" for step in place[1:])
        if not isinstance(found, list):
            what = f"{name} is {found!r}, must be a list: {_HOLDS[str(place[0])]}"
            self._fault(what, *place)
            return []
        if len(found) != len(pivots):
            at = ", ".join(f"{pivot:g}" for pivot in pivots)
            what = f"{name} lists {len(found)} numbers, must be {len(pivots)}: one for each of {at}"
            self._fault(what, *place)
        return [self._number(item, *place, i) for i, item in enumerate(found)]
