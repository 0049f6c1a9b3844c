"""Absorbers one by one, with the path on which they were found: a Poisson process.

A survey that covers redshift z on g(z) sightlines and counts absorbers whose *measured* column lies
in its range finds them with the intensity of f. With errors in log N marginalised::

    ln L = Σ_i ln [ (dX/dz) ∫ f(N, z_i) C(N) p(x_i | N) dN ] - Λ
    Λ = ∫ g(z) (dX/dz) ∫ f(N, z) C(N) S(N) dN dz

C is the completeness, p the density of the measured column, S the chance that it falls into the
range (averaged over the list's own errors). Ignoring errors would count more strong absorbers than
there are, since weak ones, which are many, scatter upwards. A row that is a lower bound has in p's
place the chance that its column lies above the bound.

Where sightlines end at their first thick absorber, the path ends there too
(`fogline.absorbers.path`); with that path the process *is* the survival likelihood, while counts
on whole sightlines would find too few.

A data set has rows of three kinds: cells of the reduced list (`fogline.absorbers.reduction`), whose
predictions are intensities; Λ; and counts in bins of the measured column, which are shown and
checked against replicates, but are no part of the likelihood.
"""

from __future__ import annotations

from collections.abc import Mapping
from itertools import pairwise
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from fogline.absorbers.errors import below, density, selected
from fogline.datasets import EXPOSURE, INTENSITY, SHOWN, DataSet
from fogline.quadrature import column_nodes
from fogline.quantities.base import Block, Setting, Term
from fogline.quantities.spec import FileSpec, MetaKey, ValueColumn, column_key

Array = NDArray[np.float64]

REACH: Final = 5.0
"""Errors beyond which a kernel is nothing."""

PANEL: Final = 3.5
"""Width of quadrature panels under a kernel, in units of the smallest error."""

SPEC: Final = FileSpec(
    quantity="absorber_list",
    description="Absorbers one by one, with the survey path on which they were found.",
    meta=(
        MetaKey(
            "survey_path",
            "text",
            "file, beside this one, with the path: kind sightlines or sensitivity",
            example="path.ecsv",
        ),
        column_key("min", "lowest measured column that the list holds", True, 20.3),
        column_key("max", "highest measured column that the list holds", False, 22.0),
        MetaKey(
            "completeness",
            "text",
            "file with the completeness of the list against log N (kind completeness)",
            required=False,
            example="completeness.ecsv",
        ),
        MetaKey(
            "ends_at_tau",
            "number",
            "sightlines end at their first absorber of this optical depth at 912 Å, as surveys of "
            "Lyman-limit systems do; needs the column 'sightline' here and in the path",
            minimum=0.0,
            exclusive=True,
            required=False,
            example=2.0,
        ),
    ),
    values={
        "": ValueColumn(
            name="log_nhi",
            logarithmic=True,
            minimum=8.0,
            maximum=26.0,
            example=20.8,
            example_err=0.12,
            help="measured log10(N / cm^-2)",
            bare_limits=True,
        )
    },
    absorbers=True,
)


class AbsorberList:
    """Absorbers one by one, as a Poisson process along the survey path."""

    spec = SPEC
    label = "number of absorbers"

    def respond(self, data: DataSet, setting: Setting) -> Block:
        """Return intensities of the cells, the expected number, and those of the bins shown."""
        assert data.role is not None
        terms: list[tuple[int, Term]] = []
        cells = np.flatnonzero(data.role == INTENSITY)
        for z in np.unique(data.z_lo[cells]):
            here = cells[data.z_lo[cells] == z]
            log_nhi, weights = self._kernels(data, setting, here)
            along = float(setting.cosmology.dx_dz(z))
            terms += _matrix_terms(float(z), log_nhi, along * weights, here)
        shown = np.flatnonzero(data.role >= EXPOSURE)
        log_nhi, weights = self._selection(data, setting)
        for z, weight in zip(data.extras["path_z"], data.extras["path_weight"], strict=True):
            along = float(weight * setting.cosmology.dx_dz(z))
            terms += _matrix_terms(float(z), log_nhi, along * weights, shown)
        return assemble_shared(terms, data.n_rows)

    def reduce(self, data: DataSet, raw: Array, constants: Mapping[str, Array]) -> Array:
        """Return the raw predictions: they are those of the rows."""
        return raw

    def _kernels(
        self, data: DataSet, setting: Setting, cells: NDArray[np.int64]
    ) -> tuple[Array, Array]:
        """Return columns, and C p dN of every cell, shape (n_columns, n_cells)."""
        y, lo, hi = data.log_nhi_lo[cells], data.err_lo[cells], data.err_hi[cells]
        bound = data.limit[cells] != 0
        widest, least = max(lo.max(), hi.max()), min(lo.min(), hi.min())
        first, last = setting.column_range
        start = min(max(first, y.min() - REACH * widest), last - 1e-3)
        end = last if bound.any() else max(min(last, y.max() + REACH * widest), start + 1e-3)
        panels = np.arange(start, min(end, y.max() + REACH * widest), PANEL * least)
        log_nhi, d_nhi = column_nodes(start, end, (*setting.distribution.kinks, *panels))
        x = log_nhi[:, None]
        kernel = np.where(bound, ndtr((x - y) / lo), density(y, x, lo, hi))
        return log_nhi, kernel * (completeness(data, log_nhi) * d_nhi)[:, None]

    def _selection(self, data: DataSet, setting: Setting) -> tuple[Array, Array]:
        """Return columns, and C S dN of the whole range and each bin, (n_columns, 1 + n_bins)."""
        lo, hi = data.extras["errors_lo"], data.extras["errors_hi"]
        least = float(data.meta["log_nhi_min"])
        most = float(data.meta.get("log_nhi_max") or np.inf)
        first, last = setting.column_range
        widest = float(max(lo.max(), hi.max()))
        start = min(max(first, least - REACH * widest), last - 1e-3)
        step = PANEL * float(min(lo.min(), hi.min()))
        ends = [end for end in (least, most) if np.isfinite(end)]
        panels = [
            x for end in ends for x in np.arange(end - REACH * widest, end + REACH * widest, step)
        ]
        bins = np.flatnonzero(data.role == SHOWN)
        edges = np.append(data.log_nhi_lo[bins], data.log_nhi_hi[bins[-1:]])
        kinks = (*setting.distribution.kinks, *panels, *edges)
        log_nhi, d_nhi = column_nodes(start, last, kinks)
        chance = [selected(log_nhi, least, most, lo, hi)]
        under = [below(edge, log_nhi[:, None], lo, hi).mean(axis=1) for edge in edges]
        chance += [above - under_ for under_, above in pairwise(under)]
        return log_nhi, np.stack(chance, axis=1) * (completeness(data, log_nhi) * d_nhi)[:, None]


def completeness(data: DataSet, log_nhi: Array) -> Array:
    """Return C at true columns; 1 where the list states none, its ends' values beyond them."""
    if "completeness" not in data.extras:
        return np.ones_like(log_nhi)
    return np.interp(log_nhi, data.extras["completeness_log_nhi"], data.extras["completeness"])


def _matrix_terms(
    z: float, log_nhi: Array, weights: Array, rows: NDArray[np.int64]
) -> list[tuple[int, Term]]:
    return [(int(row), Term(z, log_nhi, weights[:, i])) for i, row in enumerate(rows)]


def assemble_shared(terms: list[tuple[int, Term]], n_raw: int) -> Block:
    """Put terms into one block, those of one redshift and the same columns on the same points."""
    groups: dict[tuple[float, int], list[tuple[int, Term]]] = {}
    for row, term in terms:
        groups.setdefault((term.z, id(term.log_nhi)), []).append((row, term))
    blocks = []
    for group in groups.values():
        first = group[0][1]
        weights = np.zeros((len(first.log_nhi), n_raw))
        for row, term in group:
            weights[:, row] += term.weights
        blocks.append(Block(first.log_nhi, np.full(len(first.log_nhi), first.z), weights))
    return Block(
        np.concatenate([block.log_nhi for block in blocks]),
        np.concatenate([block.z for block in blocks]),
        np.concatenate([block.weights for block in blocks]),
    )
