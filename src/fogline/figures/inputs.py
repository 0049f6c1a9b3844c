"""`FigureInputs`: everything that the figures of one analysis show."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Final

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

from fogline.chains import EnsembleResult
from fogline.datasets import DataSet
from fogline.response_file import Fit

Array = NDArray[np.float64]

ONE_SIGMA: Final = (0.16, 0.5, 0.84)
"""Quantiles of the predictions that stand beside data."""


@dataclass(frozen=True)
class FigureInputs:
    """Results of one analysis; figures read no files.

    Parameters
    ----------
    fit : Fit
        Data sets, model and response.
    tables : mapping of str to astropy.table.Table
        ``column_distribution``, ``incidence``, ``hi_density``, ``lya_opacity``,
        ``mean_free_path``, ``opacity_budget``, ``predictive``, ``parameters`` as the package
        writes them.
    theta : ndarray, shape (n_draws, n_parameters)
        Posterior draws.
    prior_theta : ndarray, shape (n_prior, n_parameters)
        Draws from the prior.
    convergence : mapping
        Content of ``convergence.json``.
    ensembles : sequence of EnsembleResult
        Counted samples, in unit-normal coordinates.
    """

    fit: Fit
    tables: Mapping[str, Table]
    theta: Array
    prior_theta: Array
    convergence: Mapping[str, Any]
    ensembles: Sequence[EnsembleResult]

    @property
    def converged(self) -> bool:
        """Whether the verdict on the chains is good."""
        return bool(self.convergence["converged"])

    @cached_property
    def _predicted(self) -> Array:
        predicted = self.fit.response.predict(self.theta)
        # Free paths beyond reach are infinite: interpolating between them would give NaN.
        return np.quantile(predicted, ONE_SIGMA, axis=0, method="inverted_cdf")

    def predicted(self, data: DataSet) -> Array:
        """Return the prediction of a data set's rows in the data set's own convention.

        Parameters
        ----------
        data : DataSet
            One of the fit's.

        Returns
        -------
        ndarray, shape (3, n_rows)
            Lower end of the 68% band, median, upper end.
        """
        names = [d.name for d in self.fit.response.datasets]
        return self._predicted[:, self.fit.response.slices[names.index(data.name)]]

    def of_quantity(self, quantity: str) -> list[DataSet]:
        """Return the fit's data sets of one quantity."""
        return [data for data in self.fit.response.datasets if data.quantity == quantity]
