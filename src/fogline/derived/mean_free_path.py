"""Mean free path of photons at the Lyman limit, in both definitions."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from fogline.datasets import hypothetical
from fogline.derived.base import Draws
from fogline.response import build_response
from fogline.tables import Curve

Array = NDArray[np.float64]

QUANTITY = "mean_free_path"


class MeanFreePathTable:
    """Local and unit-depth free path against z, proper Mpc."""

    name = "mean_free_path"
    definition = (
        "local: c / [H (1+z)] over dtau/dz at 912 A, no redshifting; unit_depth: proper distance "
        "between z and the z_912 at which the optical depth reaches 1, inf where it stays below 1 "
        "down to redshift 0 (beyond reach); dz_unit_depth: z - z_912 there. Below the lowest "
        "measured redshift f is extrapolated."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Array, str, str]]:
        """Return redshift."""
        return {"z": (draws.z, "", "redshift of the source")}

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return both definitions."""
        curves = {
            definition: Curve(free_path(draws, definition), "Mpc", f"{definition} mean free path")
            for definition in ("local", "unit_depth")
        }
        step = redshift_step(draws, curves["unit_depth"].values)
        return curves | {"dz_unit_depth": Curve(step, "", "redshift below z at which tau is 1")}


def redshift_step(draws: Draws, path: Array) -> Array:
    """Return the difference in redshift that belongs to proper lengths, shape (n_draws, n_z)."""
    cosmology = draws.setting.cosmology
    steps = np.empty_like(path)
    for i, z in enumerate(draws.z):
        near = np.linspace(z, 0.0, 800)
        length = cosmology.proper_length(near, float(z))
        steps[:, i] = z - np.interp(path[:, i], length, near)
    return np.where(np.isfinite(path), steps, np.inf)


def free_path(draws: Draws, definition: str) -> Array:
    """Return the proper mean free path [Mpc], shape (n_draws, n_z).

    Parameters
    ----------
    draws : Draws
    definition : {"local", "unit_depth"}
    """
    data = hypothetical(QUANTITY, draws.z, unit="Mpc", definition=definition, frame="proper")
    return build_response([data], draws.setting).predict(draws.theta)
