"""Neutral hydrogen: Lyman lines, the photoionization cross-section, equivalent widths.

Equivalent width of a Voigt line of column density N and Doppler parameter b, rest frame, with x
the distance from the line's centre in Doppler widths::

    W = lambda (b/c) integral (1 - exp[-tau(x)]) dx
    tau(x) = N LINE_AREA f lambda / (sqrt(pi) b) H(a, x),      a = gamma lambda / (4 pi b)

H is the exact Voigt function (the Faddeeva function's real part). The profile is taken as
symmetric in x, the usual curve of growth: the asymmetry of the damping wings, of the order of
the wing's extent over lambda, is left out. The integral runs over Gauss-Legendre panels to
x = 1000; beyond, where H = a / (sqrt(pi) x^2) to 1e-6, it is done in closed form.

For 10 <= log N <= 23 and 5 <= b <= 150 km/s, W is good to 1e-6 relative; adaptive quadrature and
arbitrary-precision points in ``tests/unit/test_atomic.py`` prove it.

Photoionization from the ground state, with eps = sqrt(nu/nu_912 - 1)::

    sigma = SIGMA_912 (nu_912/nu)^4 exp(4 - 4 arctan(eps)/eps) / (1 - exp(-2 pi/eps))

References
----------
Morton 2003, ApJS 149, 205 (lines). Osterbrock & Ferland 2006, Astrophysics of Gaseous Nebulae
and Active Galactic Nuclei, eq. 2.4 (cross-section).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from fogline.constants import ANGSTROM_CM, C_CGS, KM_CM, LINE_AREA

Array = NDArray[np.float64]

SIGMA_912: Final = 6.304e-18
"""Photoionization cross-section of H I at the Lyman limit [cm^2] (Osterbrock & Ferland 2006)."""

LYMAN_LIMIT: Final = 911.7535
"""Wavelength of the Lyman limit in vacuum [Angstrom] (109678.77 cm^-1, NIST)."""


@dataclass(frozen=True, slots=True)
class LymanLine:
    """A line of the Lyman series.

    Parameters
    ----------
    n : int
        Principal quantum number of the upper level.
    wavelength : float [Angstrom, vacuum]
    f : float
        Absorption oscillator strength.
    gamma : float [s^-1]
        Damping constant.
    """

    n: int
    wavelength: float
    f: float
    gamma: float


# For n >= 7 the damping constants are the decay rates to the ground state alone, 20 to 22%
# below the full ones. Their wings matter only where the Lyman continuum is black anyway.
LYMAN_SERIES: Final[tuple[LymanLine, ...]] = (
    LymanLine(2, 1215.6701, 0.4164, 6.265e8),
    LymanLine(3, 1025.7223, 0.07912, 1.897e8),
    LymanLine(4, 972.5368, 0.02900, 8.127e7),
    LymanLine(5, 949.7431, 0.01394, 4.204e7),
    LymanLine(6, 937.8035, 0.007799, 2.450e7),
    LymanLine(7, 930.7483, 0.004814, 1.236e7),
    LymanLine(8, 926.2257, 0.003183, 8.255e6),
    LymanLine(9, 923.1504, 0.002216, 5.785e6),
    LymanLine(10, 920.9631, 0.001605, 4.210e6),
    LymanLine(11, 919.3514, 0.00120, 3.160e6),
    LymanLine(12, 918.1294, 0.000921, 2.432e6),
)
"""The Lyman series, upper levels 2 to 12 (Morton 2003, ApJS 149, 205)."""

LYMAN_ALPHA: Final = LYMAN_SERIES[0]


def oscillator_strength(n: int) -> float:
    """Return the exact absorption oscillator strength of the Lyman line 1 → n.

    Parameters
    ----------
    n : int
        2 or more.

    References
    ----------
    Textbook closed form, f = 2^8 n^5 (n-1)^(2n-4) / [3 (n+1)^(2n+4)].
    """
    ln_f = 8.0 * np.log(2.0) + 5.0 * np.log(n) - np.log(3.0)
    ln_f += (2 * n - 4) * np.log(n - 1.0) - (2 * n + 4) * np.log(n + 1.0)
    return float(np.exp(ln_f))


def lyman_series(n_max: int) -> tuple[LymanLine, ...]:
    """Return the Lyman series up to an upper level.

    Parameters
    ----------
    n_max : int

    Returns
    -------
    tuple of LymanLine
        Above n = 12 hydrogenic: λ = λ_limit / (1 - 1/n^2), exact oscillator strengths, and damping
        constants that fall as n^-3 from that of n = 12.
    """
    last = LYMAN_SERIES[-1]
    higher = [
        LymanLine(
            n,
            LYMAN_LIMIT / (1.0 - 1.0 / n**2),
            oscillator_strength(n),
            last.gamma * (last.n / n) ** 3,
        )
        for n in range(last.n + 1, n_max + 1)
    ]
    return tuple(line for line in (*LYMAN_SERIES, *higher) if line.n <= n_max)


def photoionization_cross_section(energy_ratio: ArrayLike) -> Array:
    """Return the exact cross-section of the hydrogen ground state.

    Parameters
    ----------
    energy_ratio : array_like
        Photon frequency in units of that of the Lyman limit.

    Returns
    -------
    ndarray, shape of energy_ratio [cm^2]
        `SIGMA_912` at 1, zero below. Good to a few rounding errors everywhere, at threshold too.

    References
    ----------
    Osterbrock & Ferland 2006, eq. 2.4.
    """
    ratio = np.asarray(energy_ratio, dtype=float)
    # The smallest ratio above 1 has eps = 1.5e-8, so the floor only replaces the 0/0 at 1. No
    # series is needed: arctan(eps)/eps is good to rounding, and its difference from 1 enters
    # as an absolute, not a relative, error.
    eps = np.sqrt(np.maximum(ratio - 1.0, 1e-18))
    shape = np.exp(4.0 - 4.0 * np.arctan(eps) / eps) / -np.expm1(-2.0 * np.pi / eps)
    return np.where(ratio >= 1.0, SIGMA_912 * shape / np.maximum(ratio, 1.0) ** 4, 0.0)


def log_nhi_at_tau(tau: ArrayLike) -> Array:
    """Return the column density whose optical depth at the Lyman limit is `tau`.

    Parameters
    ----------
    tau : array_like
        Optical depth at 912 Angstrom, positive.

    Returns
    -------
    ndarray, shape of tau [dex of cm^-2]
    """
    return np.log10(np.asarray(tau, dtype=float) / SIGMA_912)


_PROFILE_END: Final = 1000.0  # [Doppler widths]; beyond it a line is its Lorentz wing to 1e-6


def _half_profile_nodes() -> tuple[Array, Array]:
    # Half-width panels where the saturated core's edge can lie (x^2 = ln tau_0 < 30), then
    # panels of constant ratio, on which the Lorentz wing is equally smooth.
    edges = np.concatenate([np.arange(0.0, 6.0, 0.5), np.geomspace(6.0, _PROFILE_END, 9)])
    nodes, weights = np.polynomial.legendre.leggauss(12)
    half = 0.5 * np.diff(edges)[:, None]
    x = edges[:-1, None] + half * (1.0 + nodes)
    return x.ravel(), (half * weights).ravel()


_PROFILE_NODES: Final = _half_profile_nodes()


def equivalent_width(log_nhi: ArrayLike, b: ArrayLike, line: LymanLine = LYMAN_ALPHA) -> Array:
    """Return the rest equivalent width of a Voigt line.

    Parameters
    ----------
    log_nhi : array_like [dex of cm^-2]
    b : array_like [km / s]
        Doppler parameter, positive; broadcast against `log_nhi`.
    line : LymanLine, optional

    Returns
    -------
    ndarray, broadcast shape [Angstrom]
        Good to 1e-6 relative for 10 <= log_nhi <= 23 and 5 <= b <= 150.
    """
    x, weights = _PROFILE_NODES
    wavelength_cm = line.wavelength * ANGSTROM_CM
    b_cgs = np.asarray(b, dtype=float) * KM_CM
    damping = line.gamma * wavelength_cm / (4.0 * np.pi * b_cgs)
    scale = LINE_AREA * line.f * wavelength_cm / (np.sqrt(np.pi) * b_cgs)
    depth = 10.0 ** np.asarray(log_nhi, dtype=float) * scale
    voigt = special.wofz(x + 1j * damping[..., None]).real
    absorbed = -np.expm1(-depth[..., None] * voigt) @ weights
    half = absorbed + _lorentz_tail(depth * damping / np.sqrt(np.pi))
    return np.asarray(2.0 * line.wavelength * b_cgs / C_CGS * half)


def _lorentz_tail(wing: Array) -> Array:
    # Integral of 1 - exp(-wing / x^2) from _PROFILE_END to infinity, by parts.
    root = np.sqrt(wing)
    core = _PROFILE_END * np.expm1(-wing / _PROFILE_END**2)
    return np.asarray(np.sqrt(np.pi) * root * special.erf(root / _PROFILE_END) + core)
