"""Survey paths: what was searched, as a few weighted redshifts.

A list's expected number is ∫ g(z) h(z) dz, g the number of sightlines that cover z and h smooth.
The nodes z_m and weights w_m of Gauss's quadrature for the measure g(z) dz make Σ_m w_m h(z_m)
exact for polynomials h up to degree 2n - 1, whatever g is. They follow from the moments of g alone,
once, for any number of sightlines: with Chebyshev polynomials T_i, the matrices M = ⟨T_i, T_j⟩ and
X = ⟨x T_i, T_j⟩ under g hold sums of such moments, and X v = λ M v has the nodes as eigenvalues
(Golub and Welsch 1969, with modified moments).
"""

from __future__ import annotations

from typing import Any, Final

import numpy as np
from astropy.table import Table
from numpy.polynomial import chebyshev
from numpy.typing import NDArray
from scipy.linalg import eigh

Array = NDArray[np.float64]

STEP_WIDTH: Final = 1e-6
"""Half the redshift over which a tabulated number of sightlines changes, at most."""

PATH_NODES: Final = 5
"""Redshifts that stand for a path. From z = 1.8 to 5.2 they are good to 1e-5 for (1+z)^6."""

N_MOMENTS: Final = 2 * PATH_NODES
WORST_CONDITION: Final = 1e10
"""Of M, beyond which the path has not as many moments of its own: fewer nodes hold them all."""


def from_sightlines(z_start: Array, z_end: Array) -> tuple[Array, Array]:
    """Return redshifts and weights of a path of single sightlines.

    Parameters
    ----------
    z_start, z_end : ndarray, shape (n_sightlines,)

    Returns
    -------
    z, weights : ndarray, shape (n_nodes,)
        The weights add up to the whole path.
    """
    lo, hi = float(z_start.min()), float(z_end.max())
    half, middle = 0.5 * (hi - lo), 0.5 * (hi + lo)
    to_unit = [(z - middle) / half for z in (z_start, z_end)]
    moments = []
    for k in range(N_MOMENTS):
        integral = chebyshev.chebint(np.eye(N_MOMENTS)[k])
        start, end = (chebyshev.chebval(x, integral).sum() for x in to_unit)
        moments.append(half * (end - start))
    return _gauss(lo, hi, np.array(moments))


def from_sensitivity(z: Array, g: Array) -> tuple[Array, Array]:
    """Return redshifts and weights of a tabulated number of sightlines, linear between rows.

    Parameters
    ----------
    z, g : ndarray, shape (n_rows,)

    Returns
    -------
    z, weights : ndarray, shape (n_nodes,)
    """
    nodes, weights = np.polynomial.legendre.leggauss(PATH_NODES + 1)
    half = 0.5 * np.diff(z)
    at = z[:-1, None] + half[:, None] * (1.0 + nodes)
    measure = half[:, None] * weights * np.interp(at, z, g)
    lo, hi = float(z[0]), float(z[-1])
    x = (2.0 * at - lo - hi) / (hi - lo)
    moments = np.einsum("ij,ijk->k", measure, chebyshev.chebvander(x, N_MOMENTS - 1))
    return _gauss(lo, hi, moments)


def _gauss(lo: float, hi: float, moments: Any) -> tuple[Array, Array]:
    """Return nodes and weights from the moments of T_0 ... on an interval."""
    for n_nodes in range(PATH_NODES, 0, -1):
        i, j = np.indices((n_nodes, n_nodes))
        product = lambda k, l: 0.5 * (moments[k + l] + moments[abs(k - l)])  # noqa: E731, E741
        gram = product(i, j)
        if np.linalg.cond(gram) < WORST_CONDITION:
            break
    times_x = 0.5 * (product(i + 1, j) + product(abs(i - 1), j))
    x, vectors = eigh(times_x, gram)
    # 1 = T_0 is Σ_m (v_m · M e_0) v_m, and its share of each node is the weight.
    weights = (vectors.T @ gram[:, 0]) ** 2
    return 0.5 * (lo + hi) + 0.5 * (hi - lo) * x, weights


def truncated(
    z_start: Array, sightline: Array, absorber_z: Array, absorber_sightline: Array
) -> Array:
    """Return where sightlines end that end at their first absorber, counted from above.

    The expected number on the path down to the absorber and the intensity at it are together the
    likelihood of surviving to that redshift and being hit there: nothing is known of what is below.

    Parameters
    ----------
    z_start, sightline : ndarray, shape (n_sightlines,)
        Lower ends, and names (whole numbers).
    absorber_z, absorber_sightline : ndarray, shape (n_absorbers,)
        The absorbers that end a sightline.

    Returns
    -------
    ndarray, shape (n_sightlines,)
        Lower ends, raised to the highest such absorber.
    """
    ends = z_start.copy()
    order = np.argsort(sightline)
    where = order[np.searchsorted(sightline, absorber_sightline, sorter=order)]
    np.maximum.at(ends, where, absorber_z)
    return ends


def coverage(z_start: Array, z_end: Array) -> tuple[Array, Array]:
    """Return g(z) of sightlines at the redshifts where it changes.

    Parameters
    ----------
    z_start, z_end : ndarray, shape (n_sightlines,)

    Returns
    -------
    z, g : ndarray, shape (n_edges,)
        g holds from a redshift to the next; the last is zero.
    """
    z = np.unique(np.concatenate([z_start, z_end]))
    starts = np.searchsorted(np.sort(z_start), z, side="right")
    ends = np.searchsorted(np.sort(z_end), z, side="right")
    return z, (starts - ends).astype(float)


def sensitivity_table(z_start: Array, z_end: Array) -> Table:
    """Return g(z) of sightlines as a table that is linear between rows.

    Parameters
    ----------
    z_start, z_end : ndarray, shape (n_sightlines,)

    Returns
    -------
    astropy.table.Table
        ``z``, ``g``: two rows at each change, `STEP_WIDTH` apart.
    """
    z, g = coverage(z_start, z_end)
    before = np.concatenate([[0.0], g[:-1]])
    # A step must not be wider than what lies between two changes.
    width = min(STEP_WIDTH, 0.25 * float(np.diff(z).min())) if len(z) > 1 else STEP_WIDTH
    table = Table()
    table["z"] = np.stack([z - width, z + width], axis=1).ravel()
    table["g"] = np.stack([before, g], axis=1).ravel()
    table.meta = {"kind": "sensitivity"}
    return table
