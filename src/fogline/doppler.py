"""Doppler parameters of absorbers: nodes and weights to average over them.

Every distribution of b becomes a sum over nodes, by the trapezoid rule in a variable in which
the integrand is smooth and falls off fast on both sides, where that rule converges
exponentially (Trefethen & Weideman 2014, SIAM Rev. 56, 385):

- a single value: one node;
- Hui & Rutledge: u = (b_sigma/b)^4 is distributed as exp(-u), and the variable is ln u;
- scipy distributions, cut to b > 0: the unit normal deviate of the same probability.

Averages of the equivalent width are good to 1e-5, also for densities with kinks
(``tests/unit/test_doppler.py``).

References
----------
Hui & Rutledge 1999, ApJ 517, 541: dn/db ∝ b^-5 exp(-b_sigma^4 / b^4).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Final

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from fogline.atomic import LYMAN_ALPHA, LymanLine, equivalent_width
from fogline.distributions import (
    check_arguments,
    continuous_names,
    distribution_name,
    frozen,
)

Array = NDArray[np.float64]

TAIL: Final = 1e-5
"""Probability of the prior of a free argument that each end of its grid leaves out."""

N_GRID: Final = 12
"""Nodes of a free argument."""

_B_FLOOR: Final = 1e-6  # [km/s] far below any line's width; keeps b = 0 out of a division


def doppler_average(settings: Mapping[str, Any]) -> tuple[Array, Array]:
    """Return nodes and weights that average over the Doppler parameter.

    Parameters
    ----------
    settings : mapping
        ``{dist: fixed, b: ...}``, ``{dist: hui_rutledge, b_sigma: ...}`` [km / s], or a continuous
        distribution of `scipy.stats` by name and arguments, which is cut to positive values.

    Returns
    -------
    nodes : ndarray, shape (n_nodes,) [km / s]
    weights : ndarray, shape (n_nodes,)
        Positive, sum 1.

    Raises
    ------
    ValueError
        Where the name or an argument is wrong, or no positive values, or no finite mean exist.
    """
    name = distribution_name(settings, ["fixed", "hui_rutledge", *continuous_names()])
    if name == "fixed":
        return np.array([_only_argument(settings, "b")]), np.ones(1)
    if name == "hui_rutledge":
        return _hui_rutledge(_only_argument(settings, "b_sigma"))
    return _cut_to_positive(settings)


@dataclass(frozen=True)
class DopplerGrid:
    """A Doppler distribution with one free argument, on a grid of that argument.

    Kernels are computed at each node; between nodes they are interpolated in ln of the argument by
    the polynomial through all of them. The grid spans the central 99.998% of the prior, at whose
    ends the argument is held. Errors: ``tests/unit/test_doppler.py``.

    Parameters
    ----------
    argument : str
        Name of the free argument.
    prior : mapping
        Its prior, cut to positive values.
    settings : tuple of mapping
        The Doppler settings at each node.
    values : ndarray, shape (n_nodes,) [km / s]
        The argument at each node.
    """

    argument: str
    prior: Mapping[str, Any]
    settings: tuple[Mapping[str, Any], ...]
    values: Array

    @property
    def name(self) -> str:
        """Name among the parameters."""
        return f"doppler[{self.argument}]"

    def mix(self, argument: Array) -> Array:
        """Return the weights of the nodes at values of the argument.

        Parameters
        ----------
        argument : ndarray, shape (n,) [km / s]

        Returns
        -------
        ndarray, shape (n, n_nodes)
        """
        nodes = np.log(self.values)
        x = np.clip(np.log(argument), nodes.min(), nodes.max())
        gaps = nodes[:, None] - nodes + np.eye(len(nodes))
        away = x[:, None] - nodes
        others = np.where(np.eye(len(nodes), dtype=bool), 1.0, away[:, None, :])
        return np.asarray(others.prod(axis=2) / gaps.prod(axis=1))


def doppler_grid(settings: Mapping[str, Any]) -> DopplerGrid | None:
    """Return the grid of a Doppler distribution with a free argument; None where it has none.

    Parameters
    ----------
    settings : mapping
        As `doppler_average` takes it, one argument being a distribution: its prior.

    Raises
    ------
    ValueError
        Where more than one argument is free, or a distribution is wrong.
    """
    free = [key for key, value in settings.items() if isinstance(value, Mapping)]
    if not free:
        return None
    if len(free) > 1:
        raise ValueError(f"only one argument may be free, found {' and '.join(free)}")
    prior = frozen(settings[free[0]])
    positive = float(prior.sf(0.0))
    if not positive > 0.0:
        raise ValueError(f"no {free[0]} is positive under {dict(settings[free[0]])}")
    lo = float(prior.isf(positive * (1.0 - TAIL)))
    hi = float(prior.isf(positive * TAIL))
    # A prior that reaches down to zero: lines narrower than a tenth of the widest matter to nobody.
    lo = max(lo, 0.1 * hi)
    half, middle = 0.5 * np.log(hi / lo), 0.5 * np.log(hi * lo)
    values = np.exp(middle + half * np.cos(np.pi * np.arange(N_GRID) / (N_GRID - 1))[::-1])
    nodes = tuple({**settings, free[0]: float(value)} for value in values)
    return DopplerGrid(free[0], settings[free[0]], nodes, values)


def mean_equivalent_width(
    log_nhi: ArrayLike, settings: Mapping[str, Any], line: LymanLine = LYMAN_ALPHA
) -> Array:
    """Return the rest equivalent width averaged over the Doppler parameter.

    Parameters
    ----------
    log_nhi : array_like [dex of cm^-2]
    settings : mapping
        As `doppler_average` takes it.
    line : LymanLine, optional

    Returns
    -------
    ndarray, shape of log_nhi [Angstrom]

    Raises
    ------
    ValueError
        As `doppler_average` does.
    """
    log_nhi = np.ascontiguousarray(log_nhi, dtype=float)
    plain = tuple(sorted(settings.items()))
    return _mean_width(log_nhi.tobytes(), log_nhi.shape, plain, line).copy()


# Many data sets and tables ask for the same columns, and forty lines take seconds.
@lru_cache(maxsize=512)
def _mean_width(
    columns: bytes, shape: tuple[int, ...], settings: tuple[tuple[str, Any], ...], line: LymanLine
) -> Array:
    log_nhi = np.frombuffer(columns).reshape(shape)
    mean = np.zeros(shape)
    # One b at a time: all at once would hold columns x b x profile nodes in memory.
    for b, weight in zip(*doppler_average(dict(settings)), strict=True):
        mean += weight * equivalent_width(log_nhi, b, line)
    return mean


def _only_argument(settings: Mapping[str, Any], key: str) -> float:
    arguments = {name: value for name, value in settings.items() if name != "dist"}
    check_arguments(settings["dist"], arguments, required=[key], optional=[])
    if not arguments[key] > 0.0:
        raise ValueError(f"{key} must be positive [km/s], got {arguments[key]!r}")
    return float(arguments[key])


def _hui_rutledge(b_sigma: float) -> tuple[Array, Array]:
    # u exp(-u) is below 3e-9 at both ends; a step of 0.4 errs by |Gamma(1 + 2 pi i/0.4)| = 2e-10.
    ln_u = np.linspace(-20.0, 3.6, 60)
    return b_sigma * np.exp(-0.25 * ln_u), _normalised(np.exp(ln_u - np.exp(ln_u)))


def _cut_to_positive(settings: Mapping[str, Any]) -> tuple[Array, Array]:
    distribution = frozen(settings)
    positive = float(distribution.sf(0.0))
    if not positive > 0.0:
        raise ValueError(f"no Doppler parameter is positive under {dict(settings)}")
    if not np.isfinite(distribution.mean()):
        raise ValueError(f"the Doppler parameter has no finite mean under {dict(settings)}")
    deviate = np.arange(-6.5, 6.55, 0.1)
    # The smaller of the two tail probabilities keeps its digits: ppf below, isf above.
    low, high = deviate[deviate <= 0.0], deviate[deviate > 0.0]
    nodes = np.concatenate(
        [
            distribution.ppf(1.0 - positive + positive * special.ndtr(low)),
            distribution.isf(positive * special.ndtr(-high)),
        ]
    )
    return np.maximum(nodes, _B_FLOOR), _normalised(np.exp(-0.5 * deviate**2))


def _normalised(weights: Array) -> Array:
    return weights / weights.sum()
