"""Which classes of absorbers make the opacity, at several wavelengths."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_LIMIT, photoionization_cross_section
from fogline.cosmology import C_KM_S
from fogline.derived.base import DLA_LOG_NHI, LLS_LOG_NHI, SUB_DLA_LOG_NHI, Draws
from fogline.tables import Curve

Array = NDArray[np.float64]

CLASSES = {
    "forest": (-np.inf, LLS_LOG_NHI),
    "lls": (LLS_LOG_NHI, SUB_DLA_LOG_NHI),
    "sub_dla": (SUB_DLA_LOG_NHI, DLA_LOG_NHI),
    "dla": (DLA_LOG_NHI, np.inf),
}


class OpacityClassesTable:
    """Opacity at wavelengths below the limit, and the share of every class of absorbers."""

    name = "opacity_classes"
    definition = (
        "opacity: inverse proper free path at the wavelength, no redshifting. Shares of it: "
        "forest below log N 17.2, lls 17.2 to 19.0, sub_dla 19.0 to 20.3, dla above; thin: "
        "absorbers whose own optical depth at that wavelength is below one."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Any, str, str]]:
        """Return redshift and wavelength."""
        wavelengths = np.array(draws.derive.opacity_wavelengths)
        return {
            "z": (np.repeat(draws.z, len(wavelengths)), "", "redshift"),
            "wavelength": (np.tile(wavelengths, len(draws.z)), "Angstrom", "at the absorber"),
        }

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return opacity and shares."""
        by_class: dict[str, list[Array]] = {name: [] for name in (*CLASSES, "thin")}
        for wavelength in draws.derive.opacity_wavelengths:
            # 912 Å is meant where the limit itself is.
            ratio = max(LYMAN_LIMIT / wavelength, 1.0)
            sigma = float(photoionization_cross_section(ratio))

            def absorbed(log_nhi: Array, sigma: float = sigma) -> Array:
                return np.asarray(-np.expm1(-(10.0**log_nhi) * sigma))

            for name, (lo, hi) in CLASSES.items():
                by_class[name].append(draws.column_integral(lo, hi, absorbed))
            thin = draws.column_integral(-np.inf, -np.log10(sigma), absorbed)
            by_class["thin"].append(thin)
        parts = {name: _by_rows(values) for name, values in by_class.items()}
        total = np.sum([parts[name] for name in CLASSES], axis=0)
        z = np.repeat(draws.z, len(draws.derive.opacity_wavelengths))
        cosmology = draws.setting.cosmology
        per_mpc = cosmology.dx_dz(z) * (1.0 + z) * cosmology.hubble(z) / C_KM_S
        return {"opacity": Curve(total * per_mpc, "1 / Mpc", "inverse free path")} | {
            f"share_{name}": Curve(part / total, "", f"share of {name}")
            for name, part in parts.items()
        }


def _by_rows(values: list[Array]) -> Array:
    """Return (n_draws, n_z * n_wavelengths) from one (n_draws, n_z) a wavelength."""
    return np.stack(values, axis=2).reshape(len(values[0]), -1)
