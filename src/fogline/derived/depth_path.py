"""Lyman-continuum optical depth from a source downwards."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_LIMIT
from fogline.derived.base import Draws
from fogline.sightline_depth import depth_block
from fogline.tables import Curve

Array = NDArray[np.float64]

STEPS = np.round(np.arange(0.02, 1.001, 0.02), 2)
"""Distances in redshift below the source."""


class DepthPathTable:
    """Optical depth between a source and redshifts below it."""

    name = "depth_path"
    definition = (
        "tau: Lyman-continuum optical depth between the source at z_source and z_912 = z_source - "
        "dz, at which its photons have fallen to 912 A. Where it reaches one is the end of the "
        "unit-depth free path (dz_unit_depth in the table mean_free_path)."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Any, str, str]]:
        """Return source redshift and distance."""
        z = np.array(draws.derive.source_redshifts)
        return {
            "z_source": (np.repeat(z, len(STEPS)), "", "redshift of the source"),
            "dz": (np.tile(STEPS, len(z)), "", "redshift below the source"),
        }

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return τ."""
        depth = [
            draws.integrate(
                depth_block([(z, LYMAN_LIMIT * (1.0 + z - STEPS))], draws.setting, lines=())
            )
            for z in draws.derive.source_redshifts
        ]
        return {"tau": Curve(np.concatenate(depth, axis=1), "", "optical depth")}
