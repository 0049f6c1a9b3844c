"""Mean transmission of the intergalactic medium against observed wavelength."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from fogline.derived.base import Draws
from fogline.sightline_depth import depth_block
from fogline.tables import Curve

Array = NDArray[np.float64]


class TransmissionTable:
    """Transmission towards sources, of lines and continuum together and of each alone."""

    name = "transmission"
    definition = (
        "Mean over sightlines of the transmitted flux towards a source at z_source: total, and "
        "what the Lyman lines and the Lyman continuum leave each alone. Damped absorbers "
        "are included. A mean is not what any one sightline shows: see sightline_scatter. Light at "
        "z below the lowest measured redshift passes an extrapolated f."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Array, str, str]]:
        """Return source redshift and wavelengths."""
        z, rest = source_grid(draws)
        return {
            "z_source": (z, "", "redshift of the source"),
            "wavelength": (rest * (1.0 + z), "Angstrom", "observed wavelength"),
            "rest_wavelength": (rest, "Angstrom", "wavelength at the source"),
        }

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return the transmissions."""
        rest = np.array(draws.derive.rest_wavelengths)
        depths: dict[str, list[Array]] = {"lines": [], "continuum": []}
        # One source at a time: its weights for every wavelength are large.
        for z in draws.derive.source_redshifts:
            sightline = [(z, rest * (1.0 + z))]
            lines = depth_block(sightline, draws.setting, continuum=False)
            continuum = depth_block(sightline, draws.setting, lines=())
            depths["lines"].append(draws.integrate(lines))
            depths["continuum"].append(draws.integrate(continuum))
        in_lines, in_continuum = (np.concatenate(depths[name], axis=1) for name in depths)
        return {
            "total": Curve(np.exp(-in_lines - in_continuum), "", "mean transmission"),
            "lines": Curve(np.exp(-in_lines), "", "transmission of the Lyman lines alone"),
            "continuum": Curve(np.exp(-in_continuum), "", "transmission of the continuum alone"),
        }


def source_grid(draws: Draws) -> tuple[Array, Array]:
    """Return source redshift and rest wavelength of every row."""
    z = np.array(draws.derive.source_redshifts)
    rest = np.array(draws.derive.rest_wavelengths)
    return np.repeat(z, len(rest)), np.tile(rest, len(z))
