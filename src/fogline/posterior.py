"""The posterior in unit-normal coordinates, evaluated for all walkers at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fogline.likelihood import Likelihood
from fogline.priors import Prior
from fogline.response import Response

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
    """

    response: Response
    prior: Prior
    likelihood: Likelihood

    @classmethod
    def of(cls, response: Response, prior: Prior) -> Posterior:
        """Return the posterior of a response's own data sets."""
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
        # Heavy-tailed priors can ask for 10^400; such walkers are refused before they overflow.
        n_pivots = len(self.response.distribution.pivots)
        usable = np.abs(theta[:, :n_pivots]).max(axis=1) < LARGEST_LOG_F
        usable &= np.abs(theta[:, n_pivots:]).max(axis=1, initial=0.0) < LARGEST_EXPONENT
        if not usable.all():
            theta = np.where(
                usable[:, None], theta, theta[usable.argmax()] if usable.any() else 0.0
            )
        with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
            out = self.likelihood.ln_total(self.response.predict(theta))
        out[~usable] = -np.inf
        if np.isnan(out).any():
            culprit = theta[np.isnan(out)][0].tolist()
            raise FloatingPointError(f"the likelihood is NaN at the parameters {culprit}")
        return out

    def ln_prob(self, x: Array) -> Array:
        """Return the ln posterior density in unit-normal coordinates, not normalised by evidence.

        Parameters
        ----------
        x : ndarray, shape (n, n_dim)

        Returns
        -------
        ndarray, shape (n,)
        """
        return self.ln_likelihood(self.prior.to_parameters(x)) + self.prior.ln_density(x)
