"""Background cosmology: expansion rate, absorption distance, lengths, critical density.

A thin, frozen layer over `astropy.cosmology` that speaks plain floats in fixed units and carries
the three numbers that data files and configs state (H0, Om0, optional Ode0). Radiation is left
out, as absorption-line papers do; with Om0 = 0.3 it would change dX/dz at z = 3 by 0.02%.

Absorption distance (Bahcall & Peebles 1969, ApJ 156, L7)::

    dX/dz = H0 (1 + z)^2 / H(z)

Checked to 1e-10 against closed forms (flat, Einstein-de Sitter, empty) in
``tests/unit/test_cosmology.py``.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Final

import numpy as np
from astropy import constants, units
from astropy.cosmology import LambdaCDM
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

C_KM_S: Final = constants.c.to_value("km/s")
"""Speed of light [km/s], exact (SI)."""

_DISTANCE_NODES: Final = np.polynomial.legendre.leggauss(64)


@dataclass(frozen=True)
class Cosmology:
    """A ΛCDM cosmology in which a data set was measured or results are quoted.

    Parameters
    ----------
    H0 : float [km / s / Mpc]
        Hubble constant, positive.
    Om0 : float
        Matter density in units of the critical density, not negative.
    Ode0 : float, optional
        Density of the cosmological constant; ``1 - Om0`` (flat) where not given.
    """

    H0: float
    Om0: float
    Ode0: float | None = None
    _astropy: Any = field(init=False, repr=False, compare=False, hash=False)

    def __post_init__(self) -> None:
        if not self.H0 > 0.0:
            raise ValueError(f"H0 must be positive [km/s/Mpc], got {self.H0!r}")
        if not self.Om0 >= 0.0:
            raise ValueError(f"Om0 must not be negative, got {self.Om0!r}")
        dark = 1.0 - self.Om0 if self.Ode0 is None else self.Ode0
        # Too much dark energy has no big bang: E^2 would be negative, and H(z) NaN.
        a = np.linspace(1.0, 1.0 / 11.0, 101)
        if not np.all(self.Om0 + (1.0 - self.Om0 - dark) * a + dark * a**3 > 0.0):
            raise ValueError(f"no expansion from z = 10 to 0 with Om0={self.Om0!r}, Ode0={dark!r}")
        background = LambdaCDM(H0=self.H0, Om0=self.Om0, Ode0=dark, Tcmb0=0.0)
        object.__setattr__(self, "_astropy", background)

    @property
    def h(self) -> float:
        """H0 in units of 100 km/s/Mpc."""
        return self.H0 / 100.0

    @property
    def critical_density(self) -> float:
        """Critical density today [M_sun / Mpc^3]."""
        return float(self._astropy.critical_density0.to_value(units.Msun / units.Mpc**3))

    def hubble(self, z: ArrayLike) -> Array:
        """Return H(z) [km / s / Mpc].

        Parameters
        ----------
        z : array_like
            Redshift.

        Returns
        -------
        ndarray, shape of z [km / s / Mpc]
        """
        return self.H0 * np.asarray(self._astropy.efunc(np.asarray(z, dtype=float)))

    def dx_dz(self, z: ArrayLike) -> Array:
        """Return the absorption distance per unit redshift, H0 (1+z)^2 / H(z).

        Parameters
        ----------
        z : array_like
            Redshift.

        Returns
        -------
        ndarray, shape of z
        """
        z = np.asarray(z, dtype=float)
        return (1.0 + z) ** 2 * np.asarray(self._astropy.inv_efunc(z))

    def absorption_distance(self, z: ArrayLike) -> Array:
        """Return X(z), the absorption distance from redshift 0.

        Parameters
        ----------
        z : array_like
            Redshift.

        Returns
        -------
        ndarray, shape of z
        """
        return self._integrate(self.dx_dz, 0.0, np.asarray(z, dtype=float))

    def proper_length(self, z_near: ArrayLike, z_far: ArrayLike) -> Array:
        """Return the light-travel (proper) distance between two redshifts.

        Parameters
        ----------
        z_near, z_far : array_like
            Redshifts, broadcast against each other.

        Returns
        -------
        ndarray [Mpc]
            Integral of c dz / [(1+z) H(z)].
        """
        return self._integrate(lambda z: C_KM_S / ((1.0 + z) * self.hubble(z)), z_near, z_far)

    def comoving_length(self, z_near: ArrayLike, z_far: ArrayLike) -> Array:
        """Return the comoving line-of-sight distance between two redshifts.

        Parameters
        ----------
        z_near, z_far : array_like
            Redshifts, broadcast against each other.

        Returns
        -------
        ndarray [Mpc]
            Integral of c dz / H(z).
        """
        return self._integrate(lambda z: C_KM_S / self.hubble(z), z_near, z_far)

    @staticmethod
    def _integrate(integrand: Any, z_near: ArrayLike, z_far: ArrayLike) -> Array:
        # Gauss-Legendre in ln(1+z): 64 nodes are good to 1e-13 for 0 < z < 10, and unlike
        # adaptive quadrature they take whole arrays of limits at once.
        near, far = np.broadcast_arrays(np.log1p(z_near), np.log1p(z_far))
        nodes, weights = _DISTANCE_NODES
        half = 0.5 * (far - near)
        one_plus_z = np.exp(near[..., None] + half[..., None] * (1.0 + nodes))
        return np.asarray(half * ((integrand(one_plus_z - 1.0) * one_plus_z) @ weights))
