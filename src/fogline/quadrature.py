"""Quadrature nodes in column density and redshift.

f has kinks at its pivots and evolution pivots, and integrands end at column limits. Between those
Gauss-Legendre converges geometrically, so panels end there. Numbers of nodes were chosen so that
every quantity is right to 1e-6 for plausible splines, and to 3e-5 where the slope jumps from 0.1
to 5 at a pivot; the proof, against adaptive quadrature over random splines, is
``tests/properties/test_accuracy.py``.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from fogline.cosmology import Cosmology
from fogline.distribution import LN10

Array = NDArray[np.float64]

NODES_PER_PANEL = 5
NODES_PER_DEX = 3.0
REDSHIFT_NODES = 2
REDSHIFT_NODES_PER_LN = 5.0


@lru_cache(maxsize=64)
def _gauss_legendre(n_nodes: int) -> tuple[Array, Array]:
    return np.polynomial.legendre.leggauss(n_nodes)


def interval_nodes(lo: float, hi: float, n_nodes: int) -> tuple[Array, Array]:
    """Return Gauss-Legendre nodes and weights on an interval.

    Parameters
    ----------
    lo, hi : float
        Ends of the interval.
    n_nodes : int
        Number of nodes.

    Returns
    -------
    nodes, weights : ndarray, shape (n_nodes,)
        The weights add up to ``hi - lo``.
    """
    nodes, weights = _gauss_legendre(n_nodes)
    half = 0.5 * (hi - lo)
    return lo + half * (1.0 + nodes), half * weights


def column_nodes(lo: float, hi: float, kinks: Iterable[float]) -> tuple[Array, Array]:
    """Return nodes in log N and weights for integrals over dN.

    Parameters
    ----------
    lo, hi : float [dex of cm^-2]
        Limits of the integral.
    kinks : iterable of float [dex of cm^-2]
        Where the integrand is not smooth; those outside the limits are passed over.

    Returns
    -------
    log_nhi : ndarray, shape (n_nodes,) [dex of cm^-2]
    weights : ndarray, shape (n_nodes,) [cm^-2]
        ``g(log_nhi) @ weights`` is the integral of g dN.
    """
    edges = [lo, *sorted(k for k in kinks if lo < k < hi), hi]
    panels = [
        interval_nodes(a, b, NODES_PER_PANEL + int(np.ceil(NODES_PER_DEX * (b - a))))
        for a, b in pairwise(edges)
    ]
    log_nhi = np.concatenate([nodes for nodes, _ in panels])
    return log_nhi, np.concatenate([w for _, w in panels]) * LN10 * 10.0**log_nhi


def redshift_nodes(
    z_lo: float, z_hi: float, cosmology: Cosmology, kinks: Iterable[float] = ()
) -> tuple[Array, Array]:
    """Return nodes and weights of a mean over a redshift bin, weighted by absorption distance.

    Parameters
    ----------
    z_lo, z_hi : float
        The bin; a single node where they are equal.
    cosmology : Cosmology
        Gives the absorption distance.
    kinks : iterable of float, optional
        Redshifts at which f is not smooth; those outside the bin are passed over.

    Returns
    -------
    z, weights : ndarray, shape (n_nodes,)
        The weights add up to 1.
    """
    if z_lo == z_hi:
        return np.array([z_lo]), np.ones(1)
    # n nodes integrate (1+z)^γ over a bin of width w in ln(1+z) with an error near
    # (γ w)^(2n) / (2n)!; this keeps exponents of 8, and the flux at τ = 2, below 3e-5.
    edges = [z_lo, *sorted(k for k in kinks if z_lo < k < z_hi), z_hi]
    panels = [
        interval_nodes(
            a, b, REDSHIFT_NODES + math.ceil(REDSHIFT_NODES_PER_LN * math.log((1 + b) / (1 + a)))
        )
        for a, b in pairwise(edges)
    ]
    z, weights = (np.concatenate(part) for part in zip(*panels, strict=True))
    weights = weights * cosmology.dx_dz(z)
    return z, weights / weights.sum()
