"""Sources and background joined by the local-source relation, while free paths are short.

Where λ is much shorter than the horizon, the mean intensity is that of what is emitted within one
free path, J_ν = ε_ν λ_ν / 4π, and the photoionization rate of H I::

    Γ = 4π ∫ J_ν σ_ν / (hν) dν = (ε_912 / h) ∫_1^x_max x^(-α-1) λ(x) σ(x) dx,     x = ν / ν_912

for a comoving emissivity ε_ν = ε_912 x^-α [erg s^-1 Hz^-1 Mpc^-3], which (1+z)^3 makes proper. λ(x)
is not assumed to be a power of frequency: it is computed from f through the exact cross-section, so
that thick absorbers keep on absorbing where thin ones let pass. Photons are produced at
n = (ε_912 / h) ∫ x^(-α-1) dx per second and comoving volume. x_max = 4 is where He II takes over.

The relation is common practice.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.atomic import photoionization_cross_section
from fogline.constants import MPC_CM, PLANCK_CGS
from fogline.cosmology import C_KM_S
from fogline.quadrature import column_nodes, interval_nodes
from fogline.quantities.base import Block, Setting

Array = NDArray[np.float64]

FREQUENCY_NODES: Final = 16
"""Gauss-Legendre nodes in ln ν."""

VALID_PATH: Final = 0.1
"""Free path over the horizon c/H below which the relation is taken to hold."""


@dataclass(frozen=True)
class Spectrum:
    """Emissivity x^-α between the Lyman limit and x_max times its frequency.

    Parameters
    ----------
    index : float
        α.
    x_max : float
    """

    index: float
    x_max: float = 4.0

    def nodes(self) -> tuple[Array, Array]:
        """Return x and weights of integrals of x^(-α-1) g(x) dx, each (`FREQUENCY_NODES`,)."""
        ln_x, weights = interval_nodes(0.0, np.log(self.x_max), FREQUENCY_NODES)
        return np.exp(ln_x), weights * np.exp(-self.index * ln_x)

    def photons_per_emissivity(self) -> float:
        """Return ∫ x^(-α-1) dx / h [s^-1 per erg s^-1 Hz^-1]."""
        return float(self.nodes()[1].sum() / PLANCK_CGS)


def opacity_block(z: float, energy_ratios: Array, setting: Setting) -> Block:
    """Return the inverse proper free path [1 / Mpc] at photon energies, as a block.

    Parameters
    ----------
    z : float
    energy_ratios : ndarray, shape (n,)
        Frequencies over that of the Lyman limit.
    setting : Setting
    """
    log_nhi, d_nhi = column_nodes(*setting.column_range, setting.distribution.kinks)
    depth = 10.0 ** log_nhi[:, None] * photoionization_cross_section(energy_ratios)
    cosmology = setting.cosmology
    per_mpc = float(cosmology.dx_dz(z) * (1.0 + z) * cosmology.hubble(z) / C_KM_S)
    weights = -np.expm1(-depth) * d_nhi[:, None] * per_mpc
    return Block(log_nhi, np.full(len(log_nhi), z), weights)


def rate_per_emissivity(opacity: Array, z: float, spectrum: Spectrum) -> Array:
    """Return Γ [1/s] for one erg s^-1 Hz^-1 per comoving Mpc^3.

    Parameters
    ----------
    opacity : ndarray, shape (n, FREQUENCY_NODES) [1 / Mpc]
        At the spectrum's nodes.
    z : float
    spectrum : Spectrum
    """
    x, weights = spectrum.nodes()
    kernel = weights * photoionization_cross_section(x)
    # ε in 1/Mpc^3 times λ in Mpc is 1/Mpc^2.
    return np.asarray((1.0 + z) ** 3 / PLANCK_CGS / MPC_CM**2 * ((1.0 / opacity) @ kernel))
