"""Mean free path of ionizing photons, in either of the two definitions in use.

``local``: λ = [c / (H (1+z))] / (dτ/dz), the opacity at 912 Å at that redshift with no redshifting;
what a fit of the opacity to a composite spectrum at the quasars' redshift reports.

``unit_depth``: the length between z_em and the z_912 at which τ_LC = 1 (`fogline.unit_depth`); what
"the distance at which the flux is attenuated by 1/e" reports. It is infinite (beyond reach) where
the depth stays below one down to redshift 0.

The two differ by a factor of about two at z = 2.4. H and lengths are those of the file's cosmology;
``comoving`` lengths are (1+z) times longer, element by element. dτ/dz needs no cosmology.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np
from astropy import units
from astropy.cosmology import units as cosmology_units
from numpy.typing import NDArray

from fogline.atomic import photoionization_cross_section
from fogline.cosmology import C_KM_S, Cosmology
from fogline.datasets import DataSet
from fogline.quadrature import column_nodes
from fogline.quantities.base import Block, Setting, Term, assemble, bin_mean, row_redshifts
from fogline.quantities.spec import FileSpec, MetaKey, ValueColumn
from fogline.unit_depth import (
    depth_coefficients,
    length_table,
    path_length,
    redshift_grid,
    segment_edges,
    solve_unit_depth,
    table_basis,
)

Array = NDArray[np.float64]

SPEC: Final = FileSpec(
    quantity="mean_free_path",
    description="Mean free path of photons at the Lyman limit.",
    meta=(
        MetaKey(
            "definition",
            "choice",
            "local (inverse of the opacity at 912 Å at that redshift) or unit_depth (distance "
            "from a source at z at which the optical depth reaches 1)",
            choices=("local", "unit_depth"),
            example="local",
        ),
        MetaKey(
            "frame",
            "choice",
            "frame of the length",
            choices=("proper", "comoving"),
            example="proper",
        ),
    ),
    values={
        "": ValueColumn(
            units=("Mpc", "Mpc / littleh"),
            example=120.0,
            example_err=15.0,
            example_unit="Mpc",
            help="length",
        )
    },
    cosmology_when={},
)


def length_unit(unit: str, cosmology: Cosmology) -> float:
    """Return one Mpc in a file's unit, with 1/h taken from the file's own H0."""
    with units.add_enabled_units(cosmology_units):
        in_unit = units.Unit(unit)
        with_h = cosmology_units.with_H0(cosmology.H0 * units.km / units.s / units.Mpc)
        return float((1.0 * units.Mpc).to_value(in_unit, with_h))


class MeanFreePath:
    """Mean free path of photons at the Lyman limit."""

    spec = SPEC
    label = r"Mean free path $\lambda_\mathrm{mfp}^{912}$ [Mpc]"

    def respond(self, data: DataSet, setting: Setting) -> Block:
        """Return the opacity, or the coefficients of the optical depth, at every redshift node."""
        if data.meta["definition"] == "local":
            return self._local(data, setting)
        return self._unit_depth(data, setting)

    def reduce(self, data: DataSet, raw: Array, constants: Mapping[str, Array]) -> Array:
        """Return the free path of every row in the file's unit."""
        if data.meta["definition"] == "local":
            lengths = constants["length"] / raw
        else:
            z_em, basis = constants["z_em"], constants.get("table_basis")
            coefficients = raw.reshape(*raw.shape[:-1], len(z_em), -1)
            s = solve_unit_depth(coefficients, z_em, constants.get("edges"), basis)
            lengths = path_length(s, z_em, constants["length"])
        return _weighted_mean(lengths, constants["mean"])

    def _local(self, data: DataSet, setting: Setting) -> Block:
        cosmology = data.cosmology or setting.cosmology
        log_nhi, d_nhi = column_nodes(*setting.column_range, setting.distribution.kinks)
        absorbed = -np.expm1(-(10.0**log_nhi) * photoionization_cross_section(1.0)) * d_nhi
        nodes = row_redshifts(data, setting)
        z = np.array([z for _, z, _ in nodes])
        terms = [
            (i, Term(float(z_i), log_nhi, setting.cosmology.dx_dz(z_i) * absorbed))
            for i, z_i in enumerate(z)
        ]
        length = C_KM_S / cosmology.hubble(z) * length_unit(data.unit, cosmology)
        if data.meta["frame"] == "proper":
            length = length / (1.0 + z)
        return assemble(terms, len(nodes), length=length, mean=bin_mean(nodes, data.n_rows))

    def _unit_depth(self, data: DataSet, setting: Setting) -> Block:
        cosmology = data.cosmology or setting.cosmology
        nodes = row_redshifts(data, setting)
        z_em = np.array([z for _, z, _ in nodes])
        breaks = setting.distribution.breaks
        n_segments = 1 + sum(b < z_em.max() for b in breaks)
        grid = redshift_grid(float(z_em.max()), breaks)
        weights = []
        for z in z_em:
            log_nhi, rows = depth_coefficients(
                float(z), grid, setting.distribution, setting.cosmology, n_segments
            )
            weights.append(rows.reshape(len(rows), -1))
        comoving = data.meta["frame"] == "comoving"
        length = [length_table(float(z), cosmology, comoving) for z in z_em]
        return Block(
            log_nhi=np.tile(log_nhi, len(grid)),
            z=np.repeat(grid, len(log_nhi)),
            weights=np.ascontiguousarray(np.concatenate(weights).T),
            constants={
                "z_em": z_em,
                "length": np.array(length) * length_unit(data.unit, cosmology),
                "mean": bin_mean(nodes, data.n_rows),
                **_segment_tables(z_em, breaks, n_segments),
            },
        )


def _segment_tables(z_em: Array, breaks: tuple[float, ...], n_segments: int) -> dict[str, Array]:
    """Return what solving needs of paths that breaks cut; nothing where there is one segment."""
    if n_segments == 1:
        return {}
    edges = np.array([segment_edges(float(z), breaks, n_segments) for z in z_em])
    return {"edges": edges, "table_basis": table_basis(z_em, edges)}


def _weighted_mean(lengths: Array, mean: Array) -> Array:
    # An infinite length makes its own row infinite and no other: 0 × inf must not become NaN.
    finite = np.isfinite(lengths)
    total = np.where(finite, lengths, 0.0) @ mean
    beyond = (~finite).astype(float) @ mean > 0.0
    return np.where(beyond, np.inf, total)
