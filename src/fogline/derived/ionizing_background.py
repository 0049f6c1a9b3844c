"""Free path against the horizon, and sources from a background or the reverse."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_LIMIT
from fogline.constants import MPC_CM
from fogline.cosmology import C_KM_S
from fogline.derived.base import Draws
from fogline.local_sources import VALID_PATH, opacity_block, rate_per_emissivity
from fogline.tables import Curve

Array = NDArray[np.float64]

STREAM = 1_000_037
"""Spawn key of the random stream of the background's errors."""


class IonizingBackgroundTable:
    """Free path over the horizon; emissivity and photon production, or photoionization rate."""

    name = "ionizing_background"
    definition = (
        "path_over_horizon: local proper free path at 912 A over c/H. valid: 1 where its median is "
        f"below {VALID_PATH:g}, so that J = emissivity x path / 4 pi holds; elsewhere photons are "
        "redshifted before they are absorbed, and numbers are only indicative. emissivity: "
        "comoving, at 912 A, x^-alpha above it up to x_max times its frequency; photon_rate: "
        "ionizing photons per second and comoving Mpc^3. Free paths at higher frequencies come "
        "from f. Errors of the given table are log-normal and enter by Monte Carlo."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Any, str, str]]:
        """Return redshift and validity."""
        ratio = np.median(self._path(draws), axis=0)
        return {
            "z": (redshifts(draws), "", "redshift"),
            "valid": ((ratio < VALID_PATH).astype(int), "", "1 where the local relation holds"),
        }

    def note(self, draws: Draws) -> str:
        """Return what the validity limit means here, and what was given."""
        z = redshifts(draws)
        bad = z[np.median(self._path(draws), axis=0) >= VALID_PATH]
        given = draws.background_kind or "no background or emissivity (derive.background)"
        limit = "everywhere" if not len(bad) else f"not at z <= {bad.max():.2f}"
        return f"given: {given}; free path < {VALID_PATH:g} horizon: {limit}"

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return the free path over the horizon, and what follows from the given table."""
        curves = {
            "path_over_horizon": Curve(self._path(draws), "", "local free path over c/H"),
        }
        if not draws.background_kind:
            return curves
        spectrum = draws.spectrum
        z = redshifts(draws)
        opacity = [draws.integrate(opacity_block(x, spectrum.nodes()[0], draws.setting)) for x in z]
        per_emissivity = np.stack(
            [rate_per_emissivity(k, x, spectrum) for k, x in zip(opacity, z, strict=True)], axis=1
        )
        given = drawn_table(draws, z)
        if draws.background_kind == "emissivity":
            rate = given * per_emissivity
            return curves | {"gamma_hi": Curve(rate, "1 / s", "photoionization rate of H I")}
        if draws.background_kind == "photoionization_rate":
            emissivity = given / per_emissivity
        else:
            # J_912 [erg / (s cm2 Hz sr)] over a free path, brought to comoving Mpc^3.
            at_limit = 1.0 / self._at_limit(draws)
            emissivity = 4.0 * np.pi * given * MPC_CM**2 / at_limit / (1.0 + z) ** 3
        photons = emissivity * spectrum.photons_per_emissivity()
        unit = "erg / (s Hz Mpc3)"
        return curves | {
            "emissivity": Curve(emissivity, unit, "comoving emissivity at 912 Angstrom"),
            "photon_rate": Curve(photons, "1 / (s Mpc3)", "ionizing photons, comoving"),
        }

    def _at_limit(self, draws: Draws) -> Array:
        """Return the opacity at 912 Å [1 / Mpc], shape (n_draws, n_z)."""
        ones = np.ones(1)
        blocks = [opacity_block(z, ones, draws.setting) for z in redshifts(draws)]
        return np.concatenate([draws.integrate(block) for block in blocks], axis=1)

    def _path(self, draws: Draws) -> Array:
        horizon = C_KM_S / draws.setting.cosmology.hubble(redshifts(draws))
        return 1.0 / self._at_limit(draws) / horizon


class BreakthroughTable:
    """Redshift at which the free path outgrows the horizon, and how steeply it changes."""

    name = "breakthrough"
    definition = (
        "z_breakthrough: redshift at which the local free path is c/H; below it the universe is "
        "transparent; inf where that is not between 0.1 and 7. It lies below most data: the "
        "evolution of f is extrapolated there. path_exponent: d ln(path) / d ln(1+z), proper, "
        "between the first and the last redshift of the tables."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Any, str, str]]:
        """Return the wavelength."""
        return {"wavelength": (np.array([LYMAN_LIMIT]), "Angstrom", "wavelength of the free path")}

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return redshift and exponent."""
        grid = np.expm1(np.linspace(np.log(1.1), np.log(8.0), 140))
        cosmology = draws.setting.cosmology
        ones = np.ones(1)
        opacity = np.concatenate(
            [draws.integrate(opacity_block(float(z), ones, draws.setting)) for z in grid], axis=1
        )
        # ln of horizon over path: rises through zero at the breakthrough.
        excess = np.log(opacity * C_KM_S / cosmology.hubble(grid))
        ends = np.array([draws.z[0], draws.z[-1]])
        ln_path = np.stack([np.interp(ends, grid, row) for row in -np.log(opacity)])
        span = np.log1p(ends[1]) - np.log1p(ends[0])
        exponent = (ln_path[:, 1] - ln_path[:, 0]) / span if span > 0.0 else np.zeros(len(opacity))
        return {
            "z_breakthrough": Curve(crossing(grid, excess)[:, None], "", "breakthrough redshift"),
            "path_exponent": Curve(exponent[:, None], "", "exponent of the free path"),
        }


def crossing(z: Array, excess: Array) -> Array:
    """Return where rows of `excess` last rise through zero, infinite where they do not.

    Parameters
    ----------
    z : ndarray, shape (n_z,)
    excess : ndarray, shape (n, n_z)
    """
    up = (excess[:, :-1] < 0.0) & (excess[:, 1:] >= 0.0)
    last = up.shape[1] - 1 - np.argmax(up[:, ::-1], axis=1)
    rows = np.arange(len(excess))
    low, high = excess[rows, last], excess[rows, last + 1]
    with np.errstate(divide="ignore", invalid="ignore"):
        share = -low / (high - low)
    ln_z = np.log1p(z)
    found = np.expm1(ln_z[last] + share * (ln_z[last + 1] - ln_z[last]))
    return np.where(up.any(axis=1), found, np.inf)


def redshifts(draws: Draws) -> Array:
    """Return the redshifts of the table: those within the given one, if any."""
    if not draws.background_kind:
        return draws.z
    given = draws.background["z"]
    inside = draws.z[(draws.z >= given[0]) & (draws.z <= given[-1])]
    return inside if len(inside) else given


def drawn_table(draws: Draws, z: Array) -> Array:
    """Return the given table at redshifts, drawn from its errors, shape (n_draws, n_z).

    Errors are log-normal and independent from row to row; between rows ln value is linear in z.
    """
    given = draws.background
    seed = np.random.SeedSequence(draws.seed, spawn_key=(STREAM,))
    noise = np.random.default_rng(seed).standard_normal((len(draws.theta), len(given["z"])))
    if len(draws.theta) == 1:
        noise[:] = 0.0
    ln_value = np.log(given["value"]) + noise * given["err"] / given["value"]
    return np.exp(np.stack([np.interp(z, given["z"], row) for row in ln_value]))
