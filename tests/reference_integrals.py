"""Every prediction written out a second time, by adaptive quadrature, for tests to compare with.

Nothing here imports fogline. f comes from scipy's monotone spline and numpy's linear interpolation,
equivalent widths from scipy's Voigt profile, the cross-section from its formula, backgrounds and
constants from astropy.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property, lru_cache
from itertools import pairwise

import numpy as np
from astropy import constants, units
from astropy.cosmology import LambdaCDM
from scipy.integrate import quad, quad_vec
from scipy.interpolate import PchipInterpolator
from scipy.optimize import brentq
from scipy.special import voigt_profile

C_KM_S = 299792.458
LYA_ANGSTROM, LYA_F, LYA_GAMMA = 1215.6701, 0.4164, 6.265e8  # Morton 2003
SIGMA_912 = 6.304e-18  # [cm^2]
LN10 = np.log(10.0)


def background(H0, Om0, Ode0=None):  # noqa: N803
    """Return an astropy cosmology without radiation; flat where Ode0 is not given."""
    return LambdaCDM(H0=H0, Om0=Om0, Ode0=1.0 - Om0 if Ode0 is None else Ode0, Tcmb0=0.0)


def dx_dz(cosmology, z):
    """Return the absorption distance per unit redshift."""
    return (1.0 + z) ** 2 * cosmology.H0.value / cosmology.H(z).value


def cross_section(ratio):
    """Return the exact cross-section [cm^2] of the ground state at `ratio` Rydberg."""
    if np.ndim(ratio):
        return np.array([cross_section(r) for r in ratio])
    if ratio == 1.0:
        return SIGMA_912
    eps = np.sqrt(ratio - 1.0)
    exponent = 4.0 - 4.0 * np.arctan(eps) / eps
    return SIGMA_912 * ratio**-4.0 * np.exp(exponent) / (1.0 - np.exp(-2.0 * np.pi / eps))


def voigt_width(log_nhi, b):
    """Return the rest equivalent width [Å] of Lyα by quadrature over frequency."""
    wavelength = LYA_ANGSTROM * 1e-8  # [cm]
    doppler = b * 1e5 / wavelength  # [Hz]
    e2 = constants.e.gauss.value**2
    area = np.pi * e2 / (constants.m_e.cgs.value * constants.c.cgs.value) * LYA_F
    depth = 10.0**log_nhi * area

    def absorbed(nu):
        profile = voigt_profile(nu, doppler / np.sqrt(2.0), LYA_GAMMA / (4.0 * np.pi))
        return -np.expm1(-depth * profile)

    edges = doppler * np.array([0.0, 1.0, 2.0, 3.0, 4.0, 5.0, 7.0, 10.0, 30.0, 100.0, 1e3])
    near = sum(quad(absorbed, *ends, epsabs=0, epsrel=1e-11)[0] for ends in pairwise(edges))
    # The rest of the wing, in 1/ν.
    far = quad(lambda u: absorbed(1.0 / u) / u**2, 0.0, 1.0 / edges[-1], epsabs=0, epsrel=1e-10)[0]
    return 2.0 * (near + far) * LYA_ANGSTROM * wavelength / constants.c.cgs.value


@lru_cache
def width_of(b):
    """Return W(log N) [Å] of one Doppler parameter, interpolated from `voigt_width`."""
    centre, half = 16.5, 6.5
    points = np.polynomial.chebyshev.chebpts1(160)
    values = [np.log(voigt_width(centre + half * p, b)) for p in points]
    series = np.polynomial.chebyshev.Chebyshev.fit(points, values, len(points) - 1, domain=[-1, 1])
    return lambda log_nhi: np.exp(series((log_nhi - centre) / half))


@lru_cache
def dense_nodes(pieces):
    """Return log N and weights [dex] of 40 Gauss-Legendre nodes on every piece."""
    nodes, weights = np.polynomial.legendre.leggauss(40)
    log_nhi = [a + 0.5 * (b - a) * (1.0 + nodes) for a, b in pieces]
    return np.concatenate(log_nhi), np.concatenate([0.5 * (b - a) * weights for a, b in pieces])


@dataclass(frozen=True)
class Truth:
    """A distribution f(N, X, z) and the cosmology in which X is counted.

    Integrals over columns are adaptive unless `dense` is asked, which is quick enough to be nested.
    """

    z_ref: float
    pivots: tuple[float, ...]
    log_f: tuple[float, ...]
    evolution_pivots: tuple[float, ...]
    exponents: tuple[float, ...]
    cosmology: LambdaCDM
    adaptive: bool = True

    def __repr__(self):
        exponents = [round(float(x), 4) for x in self.exponents]
        return f"Truth({self.pivots}, {np.round(self.log_f, 4).tolist()}, {exponents})"

    @property
    def theta(self):
        """The parameter vector."""
        return np.array([*self.log_f, *self.exponents])

    def scaled(self, factor):
        """Return the same shape with `factor` times as many absorbers."""
        return replace(self, log_f=tuple(value + np.log10(factor) for value in self.log_f))

    @cached_property
    def _spline(self):
        return PchipInterpolator(self.pivots, self.log_f, extrapolate=False)

    def f(self, log_nhi, z):
        """Return f [cm^2]."""
        gamma = np.interp(log_nhi, self.evolution_pivots, self.exponents)
        return 10.0 ** (self._spline(log_nhi) + gamma * np.log10((1.0 + z) / (1.0 + self.z_ref)))

    def pieces(self, lo, hi):
        """Return the intervals between kinks of f from `lo` to `hi`."""
        kinks = {*self.pivots, *self.evolution_pivots}
        return list(pairwise([lo, *sorted(k for k in kinks if lo < k < hi), hi]))

    def integral(self, lo, hi, z, kernel: Callable = np.ones_like):
        """Return ∫ f K dN between two columns [dex]."""

        def integrand(log_nhi):
            return self.f(log_nhi, z) * kernel(log_nhi) * LN10 * 10.0**log_nhi

        if self.adaptive:
            return sum(
                quad(integrand, a, b, epsabs=0, epsrel=1e-10, limit=200)[0]
                for a, b in self.pieces(lo, hi)
            )
        log_nhi, weights = dense_nodes(tuple(self.pieces(lo, hi)))
        return integrand(log_nhi) @ weights

    @cached_property
    def dense(self):
        """The same with 40 nodes a piece instead of adaptive quadrature (compared in tests)."""
        return replace(self, adaptive=False)

    def opacity(self, z, energy_ratio=1.0):
        """Return ∫ f {1 − exp[−N σ]} dN over all pivots."""
        sigma = cross_section(energy_ratio)
        ends = self.pivots[0], self.pivots[-1]
        return self.integral(*ends, z, lambda log_nhi: -np.expm1(-(10.0**log_nhi) * sigma))

    def tau_continuum(self, z_912, z_em):
        """Return the Lyman-continuum optical depth between two redshifts."""

        def integrand(z):
            ratio = (1.0 + z) / (1.0 + z_912)
            return dx_dz(self.cosmology, z) * self.dense.opacity(z, ratio)

        # An absolute tolerance too: between equal redshifts there is nothing to be relative to.
        return quad_vec(integrand, z_912, z_em, epsabs=1e-10, epsrel=1e-9)[0]

    def z_of_unit_depth(self, z_em, n_scan=30):
        """Return z_912 at the first τ = 1 below `z_em`, None where there is none above 0."""
        scan = np.expm1(np.log1p(z_em) * (1.0 - (np.arange(1, n_scan + 1) / n_scan) ** 2))
        above = z_em
        for z in np.maximum(scan, 0.0):
            if self._tau_scanned(z, z_em) >= 1.0 and self.tau_continuum(z, z_em) >= 1.0:
                return brentq(lambda z: self.tau_continuum(z, z_em) - 1.0, z, above, xtol=1e-12)
            above = z
        return None

    def _tau_scanned(self, z_912, z_em):
        """Return τ from 20 fixed redshifts: enough to tell on which side of one it is."""
        nodes, weights = np.polynomial.legendre.leggauss(20)
        z = z_912 + 0.5 * (z_em - z_912) * (1.0 + nodes)
        opacity = [self.dense.opacity(x, (1.0 + x) / (1.0 + z_912)) for x in z]
        # A hair more than τ, so that a root just beyond a scanned redshift is not passed over.
        return 0.5 * (z_em - z_912) * (weights * dx_dz(self.cosmology, z)) @ opacity + 1e-3


def bin_mean(value, z_lo, z_hi, cosmology):
    """Return the mean of `value` over a redshift bin, weighted by absorption distance."""
    if z_lo == z_hi:
        return value(z_lo)

    def weighted(z):
        return np.array([1.0, value(z)]) * dx_dz(cosmology, z)

    weight, total = quad_vec(weighted, z_lo, z_hi, epsabs=0, epsrel=1e-9)[0]
    return total / weight


def tau_lya(truth, z, lo, hi, b):
    """Return τ_eff of Lyα from columns `lo` to `hi`."""
    moment = truth.integral(lo, hi, z, width_of(b))
    return (1.0 + z) / LYA_ANGSTROM * dx_dz(truth.cosmology, z) * moment


def path_length(z_near, z_far, cosmology, comoving=False):
    """Return the distance [Mpc] between two redshifts."""

    def step(z):
        return C_KM_S / cosmology.H(z).value / (1.0 if comoving else 1.0 + z)

    return quad(step, z_near, z_far, epsabs=0, epsrel=1e-11)[0]


def local_free_path(truth, z, cosmology, comoving=False):
    """Return [c / (H (1+z))] / (dτ/dz) [Mpc], lengths in the given cosmology."""
    dtau_dz = dx_dz(truth.cosmology, z) * truth.opacity(z)
    return C_KM_S / cosmology.H(z).value / dtau_dz / (1.0 if comoving else 1.0 + z)


def unit_depth_free_path(truth, z_em, cosmology, comoving=False):
    """Return the distance [Mpc] to the first τ = 1, infinite where there is none."""
    z_912 = truth.z_of_unit_depth(z_em)
    return np.inf if z_912 is None else path_length(z_912, z_em, cosmology, comoving)


def rho_hi(truth, z, lo, hi, cosmology):
    """Return ρ_HI [M_sun Mpc^-3] as a survey with another cosmology would quote it."""
    hydrogen = constants.m_p + constants.m_e  # the binding energy is 1e-8 of it
    moment = truth.integral(lo, hi, z, lambda log_nhi: 10.0**log_nhi)
    moment *= dx_dz(truth.cosmology, z) / dx_dz(cosmology, z)
    density = hydrogen * cosmology.H0 / constants.c * moment / units.cm**2
    return density.to_value("Msun / Mpc3")


def omega_hi(truth, z, lo, hi, cosmology):
    """Return ρ_HI over the critical density today."""
    critical = 3.0 * cosmology.H0**2 / (8.0 * np.pi * constants.G)
    return rho_hi(truth, z, lo, hi, cosmology) / critical.to_value("Msun / Mpc3")
