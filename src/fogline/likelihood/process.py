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
    def _cells(self) -> tuple[Indices, Indices]:
        """Where among these rows the cells are, and where Λ is."""
        is_cell = self.data.role[self.rows] == INTENSITY
        return np.flatnonzero(is_cell), np.flatnonzero(~is_cell)

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return n ln λ of cells, and -Λ, shape (n, k)."""
        cells, totals = self._cells
        out = np.empty((len(model), len(self.rows)))
        out[:, totals] = -model[:, self.rows[totals]]
        # Some cells hold a negative number: an intensity of zero must not make inf - inf of them.
        intensity = np.maximum(model[:, self.rows[cells]], LEAST_INTENSITY)
        out[:, cells] = self.data.observed[self.rows[cells]] * np.log(intensity)
        return out

    def replicate(self, model: Array, scatter: Array | None, rng: np.random.Generator) -> Array:
        """Return the data themselves: single absorbers are not drawn again."""
        return np.tile(self.data.observed[self.rows], (len(model), 1))

    def standardize(self, data: Array, model: Array, scatter: Array | None) -> Array:
        """Return zeros: these rows have no pulls of their own."""
        return np.zeros((*model.shape[:-1], len(self.rows)))

    def ln_conditional(self, model: Array, scatter: Array | None) -> Array:
        """Return what `ln_rows` does: only the sum over the list leaves anything out."""
        return self.ln_rows(model, scatter)

    def tails(self, model: Array, scatter: Array | None) -> tuple[Array, Array]:
        """Return halves and zeros: these rows are no data of their own."""
        shape = (len(model), len(self.rows))
        return np.full(shape, 0.5), np.zeros(shape)


@dataclass(frozen=True)
class ShownRows(CountRows):
    """Counts that are shown and checked, while the single absorbers are fitted."""

    def ln_rows(self, model: Array, scatter: Array | None) -> Array:
        """Return zeros: the absorbers are counted elsewhere."""
        return np.zeros((len(model), len(self.rows)))
