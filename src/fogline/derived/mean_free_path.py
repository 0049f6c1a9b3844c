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
        "down to redshift 0 (beyond reach). Below the lowest measured redshift f is extrapolated."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Array, str, str]]:
        """Return redshift."""
        return {"z": (draws.z, "", "redshift of the source")}

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return both definitions."""
        return {
            definition: Curve(free_path(draws, definition), "Mpc", f"{definition} mean free path")
            for definition in ("local", "unit_depth")
        }


def free_path(draws: Draws, definition: str) -> Array:
    """Return the proper mean free path [Mpc], shape (n_draws, n_z).

    Parameters
    ----------
    draws : Draws
    definition : {"local", "unit_depth"}
    """
    data = hypothetical(QUANTITY, draws.z, unit="Mpc", definition=definition, frame="proper")
    return build_response([data], draws.setting).predict(draws.theta)
