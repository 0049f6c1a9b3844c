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
    mean = np.zeros(np.shape(log_nhi))
    # One b at a time: all at once would hold columns x b x profile nodes in memory.
    for b, weight in zip(*doppler_average(settings), strict=True):
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
