"""Transmission through filters along single sightlines, and what it means for escape fractions."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import LYMAN_LIMIT, log_nhi_at_tau
from fogline.derived.base import Draws
from fogline.quadrature import column_nodes
from fogline.quantities.base import Block
from fogline.sightlines import Passband
from fogline.tables import Curve
from fogline.unit_depth import path_nodes

Array = NDArray[np.float64]

OPAQUE = 0.01
"""Transmission below which a sightline counts as opaque."""

STREAM = 1_000_033
"""Spawn key of the random stream of sightlines: apart from those of ensembles and replicates."""


class SightlineScatterTable:
    """Distribution over sightlines of the transmission through every filter."""

    name = "sightline_scatter"
    over_sightlines = True
    definition = (
        "Transmission T through a filter towards a source at z_source: bands run over single "
        "sightlines drawn from posterior samples (absorbers Poisson-drawn above log N = 15.5 "
        "without clustering, lower ones by their mean), and hold both the scatter between "
        "sightlines and the posterior's. thick_number: absorbers with tau_912 >= 1 between the "
        "source and the redshift whose limit is the filter's blue end. opaque: share of "
        "sightlines with T < 0.01 in each posterior draw."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Any, str, str]]:
        """Return filter and source redshift."""
        return filter_keys(draws)

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return the transmission of every sightline, and the share that is opaque."""
        transmission = draws.memo("sightlines", lambda: sightlines(draws))
        by_draw = transmission.reshape(-1, draws.sightlines_per_draw, transmission.shape[1])
        opaque = (by_draw < OPAQUE).mean(axis=1)
        number = np.stack([_thick_absorbers(draws, band) for band in passbands(draws)], axis=1)
        return {
            "thick_number": Curve(number, "", "mean number of absorbers with tau_912 >= 1"),
            "thick_probability": Curve(-np.expm1(-number), "", "probability of at least one"),
            "transmission": Curve(transmission, "", "transmission of single sightlines"),
            "opaque": Curve(opaque, "", "share of opaque sightlines"),
        }


class EscapeCorrectionTable:
    """Factor from observed to intrinsic Lyman-continuum flux."""

    name = "escape_correction"
    over_sightlines = True
    definition = (
        "Factor from observed to intrinsic flux through a filter. of_mean: 1 / mean transmission, "
        "with posterior bands; right for a stack of many sightlines. sightline: 1 / T of single "
        "sightlines (inf where nothing gets through); for one source the factor is not known, and "
        "dividing by the mean is not the same as marginalising over it: use the distribution of T "
        "in sightline_scatter as a prior on the transmission. mean_transmission: 1 / of_mean."
    )

    def keys(self, draws: Draws) -> Mapping[str, tuple[Any, str, str]]:
        """Return filter and source redshift."""
        return filter_keys(draws)

    def curves(self, draws: Draws) -> Mapping[str, Curve]:
        """Return the factors."""
        mean = np.stack([band.mean(draws.theta) for band in passbands(draws)], axis=1)
        with np.errstate(divide="ignore", over="ignore"):
            single = 1.0 / draws.memo("sightlines", lambda: sightlines(draws))
            return {
                "mean_transmission": Curve(mean, "", "mean transmission"),
                "of_mean": Curve(1.0 / mean, "", "1 / mean transmission"),
                "sightline": Curve(single, "", "1 / transmission of single sightlines"),
            }


def _thick_absorbers(draws: Draws, band: Passband) -> Array:
    """Return the mean number of absorbers that are thick at the limit, shape (n_draws,)."""
    wavelength, _ = band.filter.nodes(band.z)
    z_near = max(float(wavelength.min()) / LYMAN_LIMIT - 1.0, 0.0)
    if z_near >= band.z:
        return np.zeros(len(draws.theta))
    z, dz = path_nodes(z_near, band.z, draws.setting.distribution.breaks)
    least = float(log_nhi_at_tau(1.0))
    limits = draws.clip(least, np.inf)
    log_nhi, d_nhi = column_nodes(*limits, draws.setting.distribution.kinks)
    path = draws.setting.cosmology.dx_dz(z) * dz
    weights = (path[:, None] * d_nhi).reshape(-1, 1)
    block = Block(np.tile(log_nhi, len(z)), np.repeat(z, len(log_nhi)), weights)
    return draws.integrate(block)[:, 0]


def passbands(draws: Draws) -> list[Passband]:
    """Return every filter in front of every source, in the order of the tables' rows."""
    return [
        Passband(one, z, draws.setting)
        for one in draws.filters
        for z in draws.derive.source_redshifts
    ]


def filter_keys(draws: Draws) -> Mapping[str, tuple[Any, str, str]]:
    """Return the leading columns of tables over filters and sources."""
    bands = passbands(draws)
    return {
        "filter": (np.array([band.filter.name for band in bands]), "", "filter"),
        "z_source": (np.array([band.z for band in bands]), "", "redshift of the source"),
    }


def sightlines(draws: Draws) -> Array:
    """Return the transmission of drawn sightlines, shape (n_sightlines, n_rows).

    Parameters
    ----------
    draws : Draws
        The same seed gives the same sightlines.
    """
    seed = np.random.SeedSequence(draws.seed, spawn_key=(STREAM,))
    chosen = np.linspace(0, len(draws.theta) - 1, draws.sightline_draws).astype(int)
    theta = draws.theta[chosen]
    bands = passbands(draws)
    streams = seed.spawn(len(bands))
    return np.stack(
        [
            band.draw(theta, draws.sightlines_per_draw, np.random.default_rng(stream))
            for band, stream in zip(bands, streams, strict=True)
        ],
        axis=1,
    )
