"""Nuisance parameters of data sets: a calibration scale, and an extra scatter.

A data set may state, in its file's meta or in the config's ``nuisances``::

    scale: {dist: norm, loc: 1.0, scale: 0.05}       # multiplies the predictions
    scatter: {dist: halfnorm, scale: 0.03}           # is added to the errors in quadrature

Both are positive, whatever their prior says below zero. A scale multiplies the quantity itself,
and so adds log10 of it where the file's numbers are logarithms; a scale of counts is one of the
path or the completeness. A scatter has the unit of the errors: dex for logarithms, a fraction of
the value where the errors are log-normal.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.datasets import DataSet
from fogline.settings import Distribution

Array = NDArray[np.float64]

KINDS: Final = ("scale", "scatter")
NEUTRAL: Final = {"scale": 1.0, "scatter": 0.0}
"""Values with which a nuisance parameter changes nothing."""


@dataclass(frozen=True)
class Nuisance:
    """One nuisance parameter.

    Parameters
    ----------
    kind : {"scale", "scatter"}
    dataset : str
        The data set that it belongs to.
    prior : mapping
        Its prior, cut to positive values.
    """

    kind: str
    dataset: str
    prior: Distribution

    @property
    def name(self) -> str:
        """Name among the parameters, e.g. ``scale[lya_flux]``."""
        return f"{self.kind}[{self.dataset}]"


def nuisances_of(datasets: Sequence[DataSet]) -> tuple[Nuisance, ...]:
    """Return the nuisance parameters that data sets ask for, in order.

    Parameters
    ----------
    datasets : sequence of DataSet
    """
    return tuple(
        Nuisance(kind, data.name, data.meta[kind])
        for data in datasets
        for kind in KINDS
        if data.meta.get(kind) is not None
    )


@dataclass(frozen=True)
class RowNuisances:
    """Which nuisance parameters act on which rows.

    Parameters
    ----------
    scales, scatters : tuple of (slice, int)
        Rows of a data set and the index of its parameter.
    logarithmic : ndarray of bool, shape (n_rows,)
        Rows whose numbers are log10.
    """

    scales: tuple[tuple[slice, int], ...]
    scatters: tuple[tuple[slice, int], ...]
    logarithmic: NDArray[np.bool_]

    @classmethod
    def of(cls, datasets: Sequence[DataSet]) -> RowNuisances:
        """Return the nuisances of data sets, their rows one after the other."""
        found: dict[str, list[tuple[slice, int]]] = {kind: [] for kind in KINDS}
        end, index = 0, 0
        for data in datasets:
            start, end = end, end + data.n_rows
            for nuisance in nuisances_of([data]):
                found[nuisance.kind].append((slice(start, end), index))
                index += 1
        logarithmic = [np.full(data.n_rows, data.logarithmic) for data in datasets]
        return cls(tuple(found["scale"]), tuple(found["scatter"]), np.concatenate(logarithmic))

    def scaled(self, predicted: Array, values: Array | None) -> Array:
        """Return predictions with the scales applied.

        Parameters
        ----------
        predicted : ndarray, shape (n, n_rows)
        values : ndarray, shape (n, n_nuisances), or None
            All neutral where None.
        """
        if values is None or not self.scales:
            return predicted
        predicted = predicted.copy()
        for rows, index in self.scales:
            scale = values[:, index, None]
            if self.logarithmic[rows][0]:
                predicted[:, rows] += np.log10(scale)
            else:
                predicted[:, rows] *= scale
        return predicted

    def scatter(self, values: Array | None) -> Array | None:
        """Return the extra scatter of all rows, shape (n, n_rows); None where there is none."""
        if values is None or not self.scatters:
            return None
        scatter = np.zeros((len(values), len(self.logarithmic)))
        for rows, index in self.scatters:
            scatter[:, rows] = values[:, index, None]
        return scatter
