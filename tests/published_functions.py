"""The distribution of Inoue, Shimizu, Iwata & Tanaka 2014 (MNRAS 442, 1805), as fogline takes it.

The number of absorbers per dz and dN is the sum of two components f_i(z) g_i(N) with
g_i ∝ N^-β exp(-N/N_c) from log N = 12, ∫ g dN = 1, log N_c = 21 (status: memory).

An Einstein-de Sitter cosmology, dX/dz = √(1+z), makes powers of 1+z per dz powers of 1+z per dX:
what is counted on the sky, and optical depths with it, know no cosmology.
"""

from __future__ import annotations

import dataclasses

import numpy as np

from fogline.cosmology import Cosmology
from fogline.distribution import ColumnDistribution
from fogline.quantities import Setting
from fogline.unit_depth import continuum_weights, redshift_grid

PIVOTS = tuple(float(p) for p in np.linspace(12.0, 22.5, 106))
EDS = Cosmology(70.0, 1.0, 0.0)
FLAT = Cosmology(70.0, 0.3)


@dataclasses.dataclass(frozen=True)
class Component:
    """Absorbers per dz and dN: amplitude [(1+z)/(1+z0)]^gamma g(N)."""

    amplitude: float
    z0: float
    gamma: float
    beta: float

    def log_g(self, log_nhi):
        def shape(p):
            return -self.beta * p - 10.0 ** (p - 21.0) / np.log(10.0)

        dense = np.linspace(12.0, 23.5, 100_001)
        integrand = 10.0 ** (shape(dense) + dense) * np.log(10.0)
        return shape(np.asarray(log_nhi)) - np.log10(np.trapezoid(integrand, dense))

    def per_dz(self, log_nhi, z):
        evolved = self.amplitude * ((1.0 + z) / (1.0 + self.z0)) ** self.gamma
        return evolved * 10.0 ** self.log_g(log_nhi)

    def tau(self, z_912, z_em):
        """τ_LC between two redshifts by fogline's weights."""
        distribution = ColumnDistribution(self.z0, PIVOTS, (17.0,))
        log_f = np.log10(self.per_dz(PIVOTS, self.z0) / EDS.dx_dz(self.z0))
        theta = np.array([*log_f, self.gamma - 0.5])
        grid = redshift_grid(z_em)
        log_nhi, weights = continuum_weights(z_912, z_em, grid, distribution, EDS)
        f = [10.0 ** distribution.log_f(theta, log_nhi, z) for z in grid]
        return np.sum(np.array(f) * weights)


LAF = Component(500.0, 1.2, 2.7, 1.7)  # 1.2 < z < 4.7
LAF_HIGH = Component(500.0 * (5.7 / 2.2) ** 2.7, 4.7, 4.5, 1.7)  # z > 4.7
DLA = Component(1.1, 2.0, 2.0, 0.9)  # z > 2


def whole(z):
    """Setting and parameters of both components at z; each column evolves as its mix does."""
    laf, dla = (component.per_dz(PIVOTS, z) for component in (LAF, DLA))
    exponents = (LAF.gamma * laf + DLA.gamma * dla) / (laf + dla) - 0.5
    theta = np.array([*np.log10((laf + dla) / EDS.dx_dz(z)), *exponents])
    setting = Setting(ColumnDistribution(z, PIVOTS, PIVOTS), EDS, {"dist": "fixed", "b": 26.0})
    return setting, theta
