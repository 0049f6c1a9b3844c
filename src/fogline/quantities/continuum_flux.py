"""Flux of stacked quasars below and around the Lyman limit, lines and continuum together.

Rows are rest wavelengths of a composite spectrum of sources at z (or in a redshift bin). The number
is the mean transmission at that wavelength, over that at a reference wavelength where the file
states one::

    F(λ) = <exp[-τ(λ (1+z); z)]> / <exp[-τ(λ_ref (1+z); z)]>

with τ of `fogline.sightline_depth`: the Lyman continuum of everything between the source and the
redshift at which the photon falls to the limit, and all lines of the Lyman series (unless the file
says that they were removed). Nothing is assumed of a free path. The intrinsic continuum is what the
file's authors divided by: an error of its slope needs a covariance, one of its level a scale.

In wavelength bins the mean runs over wavelength, in redshift bins over absorption distance.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from itertools import pairwise
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_LIMIT
from fogline.datasets import DataSet
from fogline.quadrature import interval_nodes
from fogline.quantities.base import Block, Setting, row_redshifts
from fogline.quantities.spec import FileSpec, MetaKey, ValueColumn, column_key
from fogline.sightline_depth import WHOLE_SERIES, depth_block

Array = NDArray[np.float64]

WAVELENGTH_NODES: Final = 2
NODES_PER_ANGSTROM: Final = 0.1
"""Nodes of a wavelength bin between edges of lines: so many, and so many per Angstrom more."""

SPEC: Final = FileSpec(
    quantity="continuum_flux",
    description="Mean transmitted flux of stacked quasars against rest wavelength.",
    meta=(
        MetaKey(
            "lines",
            "choice",
            "absorption by lines of the Lyman series: included in the flux, or removed from it",
            choices=("included", "removed"),
            example="included",
        ),
        MetaKey(
            "reference_wavelength",
            "number",
            "rest wavelength [Angstrom] at which the flux is 1; without it the intrinsic continuum",
            minimum=1.0,
            maximum=1e5,
            required=False,
            example=920.0,
        ),
        column_key("max", "highest column in the stacked sightlines", False, 20.3),
    ),
    values={
        "": ValueColumn(
            maximum=10.0, example=0.6, example_err=0.03, help="mean flux over the reference"
        )
    },
    wavelengths=True,
)


class ContinuumFlux:
    """Mean transmitted flux of stacked quasars against rest wavelength."""

    spec = SPEC
    label = "mean transmitted flux"

    def respond(self, data: DataSet, setting: Setting) -> Block:
        """Return τ at every wavelength node, and at the reference, of every redshift node."""
        assert data.wavelength_lo is not None
        assert data.wavelength_hi is not None
        included = data.meta["lines"] == "included"
        edges = [LYMAN_LIMIT, *(WHOLE_SERIES if included else ())]
        reference = data.meta.get("reference_wavelength")
        # Rows share sources and the reference: every redshift and wavelength is computed once.
        wanted: dict[tuple[float, float], int] = {}
        mean, references = [], []
        for row, z, weight in row_redshifts(data, setting):
            ends = float(data.wavelength_lo[row]), float(data.wavelength_hi[row])
            for wavelength, share in zip(*wavelength_nodes(*ends, edges), strict=True):
                index = wanted.setdefault((z, float(wavelength)), len(wanted))
                mean.append((index, row, weight * share))
            if reference is not None:
                index = wanted.setdefault((z, float(reference)), len(wanted))
                references.append((index, row, weight))
        top = data.meta.get("log_nhi_max")
        columns = None if top is None else (setting.column_range[0], float(top))
        shape = len(wanted), data.n_rows
        return depth_block(
            [(z, (1.0 + z) * wavelength) for z, wavelength in wanted],
            setting,
            lines=None if included else (),
            columns=columns,
            mean=_matrix(mean, shape),
            reference=_matrix(references, shape),
        )

    def reduce(self, data: DataSet, raw: Array, constants: Mapping[str, Array]) -> Array:
        """Return the mean flux of every row over that at its reference."""
        if data.meta.get("reference_wavelength") is None:
            return np.asarray(np.exp(-raw) @ constants["mean"])
        # Counted from the least depth, so that the ratio stays one of finite numbers where hardly
        # anything gets through.
        flux = np.exp(raw.min(axis=-1, keepdims=True) - raw)
        mean, reference = flux @ constants["mean"], flux @ constants["reference"]
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            return np.where(reference > 0.0, mean / reference, np.inf)


def wavelength_nodes(lo: float, hi: float, edges: list[float]) -> tuple[Array, Array]:
    """Return nodes of the mean over a bin of rest wavelengths, and weights that add up to 1.

    Parameters
    ----------
    lo, hi : float [Angstrom]
        A single node where they are equal.
    edges : list of float [Angstrom]
        Where the flux is not smooth: panels end there.
    """
    if lo == hi:
        return np.array([lo]), np.ones(1)
    panels = pairwise([lo, *sorted(edge for edge in edges if lo < edge < hi), hi])
    parts = [
        interval_nodes(a, b, WAVELENGTH_NODES + math.ceil(NODES_PER_ANGSTROM * (b - a)))
        for a, b in panels
    ]
    nodes, weights = (np.concatenate(part) for part in zip(*parts, strict=True))
    return nodes, weights / weights.sum()


def _matrix(entries: list[tuple[int, int, float]], shape: tuple[int, int]) -> Array:
    matrix = np.zeros(shape)
    for index, row, weight in entries:
        matrix[index, row] += weight
    return matrix
