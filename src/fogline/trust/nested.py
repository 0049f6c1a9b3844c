"""A general nested sampler on the same posterior, by the library dynesty (an optional extra).

Nested samplers are wrong here at their usual settings, by many times their stated errors: a thin
curved shell needs many slices before a new point has forgotten the one that it started from. On
posteriors of few data no setting was found at which two runs agreed within minutes; the settings
below are generous, and slow. Two runs are made, and only where they agree
(`fogline.trust.agreement`) do they judge anything; else the table says that they don't.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from fogline.faults import Fault, InputError
from fogline.trust.tempering import LnLikelihood

Array = NDArray[np.float64]

LIVE_POINTS: Final = 500
N_SLICES: Final = 12
"""Slices of a new point: the library's default is 3 + dimensions / 3 or so."""

LEFT_OVER: Final = 0.05
"""ln Z that live points may still hold at the end."""

EDGE: Final = 1e-15
"""Unit-cube coordinates are kept this far from 0 and 1."""


@dataclass(frozen=True)
class Nested:
    """What one run found.

    Parameters
    ----------
    x : ndarray, shape (n_draws, n_dim)
        Equally weighted draws, as many as are effective.
    ln_z, error : float
        With the error that the library states.
    n_calls : int
        Likelihoods evaluated.
    """

    x: Array
    ln_z: float
    error: float
    n_calls: int


def nested(ln_likelihood: LnLikelihood, n_dim: int, rng: np.random.Generator) -> Nested:
    """Sample a posterior by nested sampling.

    Parameters
    ----------
    ln_likelihood : callable
        ``(n, n_dim) -> (n,)`` in coordinates whose prior is a unit normal.
    n_dim : int
    rng : numpy.random.Generator

    Raises
    ------
    InputError
        Where the library is not installed.
    """
    try:
        from dynesty import NestedSampler
    except ImportError:
        what = (
            "the nested sampler needs dynesty, which is not installed: pip install -e '.[nested]'"
        )
        raise InputError([Fault("config", 1, what)]) from None

    def ln_l(x: Array) -> float:
        # The library asks for finite numbers.
        return max(float(ln_likelihood(x[None])[0]), -1e300)

    sampler = NestedSampler(
        ln_l,
        lambda u: ndtri(np.clip(u, EDGE, 1.0 - EDGE)),
        n_dim,
        nlive=LIVE_POINTS,
        sample="rslice",
        slices=N_SLICES,
        rstate=rng,
    )
    sampler.run_nested(dlogz=LEFT_OVER, print_progress=False)
    found = sampler.results
    weight = np.exp(found.logwt - found.logz[-1])
    weight /= weight.sum()
    n_effective = int(1.0 / (weight**2).sum())
    kept = rng.choice(len(weight), size=n_effective, p=weight)
    return Nested(
        np.asarray(found.samples)[kept],
        float(found.logz[-1]),
        float(found.logzerr[-1]),
        int(np.sum(found.ncall)),
    )
