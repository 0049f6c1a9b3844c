"""Filters: throughput against observed wavelength, from files or as top-hats."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fogline.side_tables import read_side_table

Array = NDArray[np.float64]

NODES: Final = 24
"""Wavelengths at which the transmission through a filter is computed."""


@dataclass(frozen=True)
class Filter:
    """A filter, fixed in the observer's frame or in the source's.

    Parameters
    ----------
    name : str
    wavelength, throughput : ndarray, shape (n,)
        Corners of the curve [Angstrom]; linear between them, nothing outside.
    rest : bool
        Whether wavelengths are those at the source.
    """

    name: str
    wavelength: Array
    throughput: Array
    rest: bool = False

    def nodes(self, z: float) -> tuple[Array, Array]:
        """Return observed wavelengths and weights of the mean through the filter.

        Parameters
        ----------
        z : float
            Redshift of the source.

        Returns
        -------
        wavelength : ndarray, shape (NODES,) [Angstrom]
        weights : ndarray, shape (NODES,)
            Add up to 1. The mean is one over wavelength, for a source of flat f_λ in photons.
        """
        edges = np.linspace(self.wavelength[0], self.wavelength[-1], NODES + 1)
        # Midpoints: the transmission has steps at the edges of lines, which no rule integrates
        # better than their spacing.
        middle = 0.5 * (edges[1:] + edges[:-1])
        weights = np.interp(middle, self.wavelength, self.throughput)
        return middle * (1.0 + z if self.rest else 1.0), weights / weights.sum()


LYMAN_CONTINUUM: Final = Filter("lyc_880_910", np.array([880.0, 910.0]), np.ones(2), rest=True)
"""Where most searches for escaping ionizing light look."""


def read_filters(items: Iterable[str | Mapping[str, Any]]) -> tuple[Filter, ...]:
    """Return the filters that a config names.

    Parameters
    ----------
    items : iterable of str or mapping
        A file, named by its stem, or a top-hat ``{name, lo, hi, frame}``.

    Raises
    ------
    InputError
        With every fault of a file.
    """
    filters = []
    for item in items:
        if isinstance(item, str):
            curve = read_side_table(item, "filter")
            filters.append(Filter(Path(item).stem, curve["wavelength"], curve["throughput"]))
        else:
            ends = np.array([item["lo"], item["hi"]], dtype=float)
            filters.append(Filter(item["name"], ends, np.ones(2), item.get("frame") == "rest"))
    return tuple(filters)
