"""Lists of absorbers reduced to sufficient statistics.

The likelihood of a list holds Σ_i L(x_i, z_i, σ_i), L = ln ∫ f C p(x | N) dN being smooth in the
measured column x, the redshift and the errors. The sum over any number of rows is therefore, to
1e-4 of itself, a sum Σ_g n_g L(x_g, z_g, σ_g) over a grid of cells: each row is shared out among
its neighbours with the weights of interpolation, cubic in x at `COLUMN_STEP` of an error, linear in
ln(1+z) (in which ln f is linear), polynomial in the errors. The n_g are fractional, and some are
negative; how many cells there are does not depend on the number of rows.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product
from typing import Final

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

COLUMN_STEP: Final = 0.5
"""Distance of cells in log N, in units of the smaller error."""

REDSHIFT_STEP: Final = 0.25
"""Distance of cells in ln(1+z), at most."""

ERROR_NODES: Final = 4
"""Values of an error that stand for a whole range of them."""

NEGLIGIBLE: Final = 1e-9
"""Share of a row below which a cell is left out."""


@dataclass(frozen=True)
class Cells:
    """Cells and what they hold.

    Parameters
    ----------
    log_nhi, z, lo, hi : ndarray, shape (n_cells,)
        Measured column [dex of cm^-2], redshift, errors [dex].
    number : ndarray, shape (n_cells,)
        n_g.
    """

    log_nhi: Array
    z: Array
    lo: Array
    hi: Array
    number: Array


def reduce_list(log_nhi: Array, z: Array, lo: Array, hi: Array) -> Cells:
    """Return the cells of a list.

    Parameters
    ----------
    log_nhi, z, lo, hi : ndarray, shape (n_rows,)
        Measured columns [dex of cm^-2], redshifts, errors [dex].

    Returns
    -------
    Cells
    """
    z_nodes, z_index, z_share = _redshift_shares(z)
    parts = []
    for (sigma_lo, sigma_hi), share in _error_shares(lo, hi):
        step = COLUMN_STEP * min(sigma_lo, sigma_hi)
        first = np.floor(log_nhi.min() / step) - 1.0
        position = log_nhi / step - first
        start = np.floor(position).astype(np.int64) - 1
        n_columns = int(start.max()) + 4
        number = np.zeros(n_columns * len(z_nodes))
        for k, weight in enumerate(_cubic_weights(position - start)):
            for side in range(2):
                cell = (start + k) * len(z_nodes) + z_index + side
                shares = share * weight * (z_share if side else 1.0 - z_share)
                number += np.bincount(
                    np.minimum(cell, len(number) - 1), weights=shares, minlength=len(number)
                )
        kept = np.flatnonzero(np.abs(number) > NEGLIGIBLE)
        parts.append(
            Cells(
                (first + kept // len(z_nodes)) * step,
                z_nodes[kept % len(z_nodes)],
                np.full(len(kept), sigma_lo),
                np.full(len(kept), sigma_hi),
                number[kept],
            )
        )
    names = ("log_nhi", "z", "lo", "hi", "number")
    whole = [np.concatenate([getattr(part, name) for part in parts]) for name in names]
    # Cells of one redshift stand together: their kernels use the same points.
    order = np.argsort(whole[1], kind="stable")
    return Cells(*(column[order] for column in whole))


def _cubic_weights(t: Array) -> tuple[Array, Array, Array, Array]:
    """Return the weights of four neighbours at 0, 1, 2, 3 for a point at t, 1 <= t < 2."""
    a, b, c, d = t, t - 1.0, t - 2.0, t - 3.0
    return -b * c * d / 6.0, a * c * d / 2.0, -a * b * d / 2.0, a * b * c / 6.0


def _redshift_shares(z: Array) -> tuple[Array, NDArray[np.int64], Array]:
    """Return the nodes, and for every row the node below it and the share of the one above."""
    u = np.log1p(z)
    span = float(np.ptp(u))
    if span == 0.0:
        return z[:1].copy(), np.zeros(len(z), dtype=np.int64), np.zeros(len(z))
    n_steps = max(1, int(np.ceil(span / REDSHIFT_STEP)))
    position = (u - u.min()) / span * n_steps
    index = np.minimum(position.astype(np.int64), n_steps - 1)
    nodes = np.expm1(u.min() + span * np.arange(n_steps + 1) / n_steps)
    return nodes, index, position - index


def _error_shares(lo: Array, hi: Array) -> list[tuple[tuple[float, float], Array]]:
    """Return pairs of errors, and the share that every row has in each."""
    if np.array_equal(lo, hi):
        nodes, shares = _node_shares(lo)
        return [((float(x), float(x)), shares[:, i]) for i, x in enumerate(nodes)]
    lower, upper = _node_shares(lo), _node_shares(hi)
    return [
        ((float(lower[0][i]), float(upper[0][j])), lower[1][:, i] * upper[1][:, j])
        for i, j in product(range(len(lower[0])), range(len(upper[0])))
    ]


def _node_shares(sigma: Array) -> tuple[Array, Array]:
    """Return nodes of one error, and Lagrange weights of every row, shape (n_rows, n_nodes)."""
    values = np.unique(sigma)
    if len(values) <= ERROR_NODES:
        return values, (sigma[:, None] == values).astype(float)
    lo, hi = values[0], values[-1]
    nodes = 0.5 * (lo + hi) - 0.5 * (hi - lo) * np.cos(np.linspace(0.0, np.pi, ERROR_NODES))
    shares = np.ones((len(sigma), ERROR_NODES))
    for i, j in product(range(ERROR_NODES), repeat=2):
        if i != j:
            shares[:, i] *= (sigma - nodes[j]) / (nodes[i] - nodes[j])
    return nodes, shares
