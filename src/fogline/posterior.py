"""The posterior in unit-normal coordinates, evaluated for all walkers at once.

`Posterior.ln_likelihood` takes parameters and is computed in double precision; `Posterior.ln_prob`
takes sampling coordinates, and its predictions come from `fogline.walkers`, in half the time.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from fogline.likelihood import Likelihood
from fogline.priors import Prior
from fogline.response import Response
from fogline.walkers import WalkerResponse

Array = NDArray[np.float64]

LARGEST_LOG_F = 150.0
LARGEST_EXPONENT = 100.0


@dataclass(frozen=True)
class Posterior:
    """Prior times likelihood.

    Parameters
    ----------
    response : Response
        Predictions of all data sets.
    prior : Prior
        Prior of the parameters.
    likelihood : Likelihood
        Likelihood of the concatenated rows.
    inside : callable, optional
        Region of predictions, (n, n_rows) -> (n,) of bool, outside which the prior is cut to zero
        (its normalisation is left as it is); none by default.
    """

    response: Response
    prior: Prior
    likelihood: Likelihood
    inside: Callable[[Array], NDArray[np.bool_]] | None = None

    @cached_property
    def walkers(self) -> WalkerResponse:
        """The response of the hot loop, about the median of the prior."""
        median = self.prior.to_parameters(np.zeros((1, self.prior.n_dim)))[0]
        return WalkerResponse(self.response, median)

    @classmethod
    def of(cls, response: Response, prior: Prior) -> Posterior:
        """Return the posterior of a response's own data sets.

        Parameters
        ----------
        response : Response
        prior : Prior
            With the nuisance parameters of the response's data sets.
        """
        return cls(response, prior, Likelihood.from_datasets(response.datasets))

    @property
    def n_dim(self) -> int:
        """Number of parameters."""
        return self.prior.n_dim

    def ln_likelihood(self, theta: Array) -> Array:
        """Return ln p(data | θ).

        Parameters
        ----------
        theta : ndarray, shape (n, n_dim)

        Returns
        -------
        ndarray, shape (n,)
            −inf where the parameters leave the range of floating-point numbers.

        Raises
        ------
        FloatingPointError
            Where the likelihood is NaN: a bug, reported with the parameters that made it.
        """
        # Heavy-tailed priors can ask for 10^400; such vectors are refused before they overflow.
        n_pivots, n_exponents, _ = self.response.distribution.shape
        exponents = theta[:, n_pivots : n_pivots + n_exponents]
        usable = np.abs(theta[:, :n_pivots]).max(axis=1) < LARGEST_LOG_F
        usable &= np.abs(exponents).max(axis=1, initial=0.0) < LARGEST_EXPONENT
        return self._ln_total(self.response.predict, theta, usable)

    def ln_prob(self, x: Array) -> Array:
        """Return the ln posterior density in unit-normal coordinates, not normalised by evidence.

        Parameters
        ----------
        x : ndarray, shape (n, n_dim)

        Returns
        -------
        ndarray, shape (n,)
            −inf where the parameters leave the range of single precision.

        Raises
        ------
        FloatingPointError
            Where it is NaN: a bug, reported with the parameters that made it.
        """
        theta = self.prior.to_parameters(x)
        usable = self.walkers.in_range(theta)
        ln_likelihood = self._ln_total(self.walkers.predict, theta, usable)
        return ln_likelihood + self.prior.ln_density(x)

    def _ln_total(
        self, predict: Callable[[Array], Array], theta: Array, usable: NDArray[np.bool_]
    ) -> Array:
        """Return ln p(data | θ) where parameters are usable, −inf elsewhere."""
        # Told apart first: comparisons with NaN are false, and would refuse it without a word.
        _raise_on_nan(theta, theta)
        out = np.full(len(theta), -np.inf)
        if usable.any():
            kept = theta if usable.all() else theta[usable]
            with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
                nuisances = kept[:, self.response.n_parameters :]
                predicted = predict(kept)
                ln_p = self.likelihood.ln_total(predicted, nuisances)
                if self.inside is not None:
                    ln_p = np.where(self.inside(predicted), ln_p, -np.inf)
                out[usable] = ln_p
        _raise_on_nan(out[:, None], theta)
        return out


def _raise_on_nan(values: Array, theta: Array) -> None:
    """Raise where any row of `values` holds NaN, with that row's parameters."""
    bad = np.isnan(values).any(axis=1)
    if bad.any():
        culprit = theta[bad][0].tolist()
        raise FloatingPointError(f"the likelihood is NaN at the parameters {culprit}")
