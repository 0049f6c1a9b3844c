"""The likelihood of a Poisson process: intensities where absorbers are, and the expected number.

Of a list reduced to cells, ln L = Σ_g n_g ln λ_g - Λ. Rows that are shown instead of the single
absorbers have replicates and pulls like counts, and no say in the likelihood.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from fogline.datasets import INTENSITY
from fogline.likelihood.base import Array, Indices, RowData
from fogline.likelihood.rows import CountRows

LEAST_INTENSITY = float(np.finfo(float).tiny)
"""Where f has fallen to nothing, ln of this stands for its intensity: -708 for each absorber."""


@dataclass(frozen=True)
class ProcessRows:
    """Cells of intensity, and the expected number of the whole path."""

    data: RowData
    rows: Indices

    @cached_property
    def _is_cell(self) -> Array:
        return (self.data.role[self.rows] == INTENSITY).astype(float)

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return n ln λ of cells, and -Λ, shape (n, k)."""
        expected = model[:, self.rows]
        number = self.data.observed[self.rows] * self._is_cell
        # Some cells hold a negative number: an intensity of zero must not make inf - inf of them.
        ln_intensity = np.log(np.maximum(expected, LEAST_INTENSITY))
        return np.asarray(number * ln_intensity - (1.0 - self._is_cell) * expected)

    def replicate(self, model: Array, scatter: Array | None, rng: np.random.Generator) -> Array:
        """Return the data themselves: single absorbers are not drawn again."""
        return np.tile(self.data.observed[self.rows], (len(model), 1))

    def standardize(self, data: Array, model: Array, scatter: Array | None) -> Array:
        """Return zeros: these rows have no pulls of their own."""
        return np.zeros((*model.shape[:-1], len(self.rows)))


@dataclass(frozen=True)
class ShownRows(CountRows):
    """Counts that are shown and checked, while the single absorbers are fitted."""

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return zeros: the absorbers are counted elsewhere."""
        return np.zeros((len(model), len(self.rows)))
