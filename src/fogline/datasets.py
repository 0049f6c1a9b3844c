"""`DataSet`: one validated constraint file as arrays, in the file's own convention."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fogline.cosmology import Cosmology

Array = NDArray[np.float64]

MEASURED, INTENSITY, EXPOSURE, SHOWN = range(4)
"""Roles of rows: a measurement or count; a cell of a list of absorbers, with their number in it;
the expected number of that list; a count that is shown but not fitted."""


@dataclass(frozen=True)
class DataSet:
    """Measurements of one quantity from one file; the numbers are those of the file.

    Parameters
    ----------
    name : str
        The file's stem; names the data set everywhere.
    path : str
        The file, as the user named it.
    quantity : str
        Registry name of what is measured.
    meta : mapping
        The file's meta with defaults filled in (without ``cosmology``).
    unit : str
        Unit of `observed` as an astropy string; empty where dimensionless.
    z_lo, z_hi : ndarray, shape (n_rows,)
        Redshift bin; equal where the row is at a single redshift.
    observed : ndarray, shape (n_rows,) [unit]
        Value, limit or count.
    err_lo, err_hi : ndarray, shape (n_rows,) [unit]
        One-sigma errors of each side; NaN for counts and where a limit states none.
    limit : ndarray of int, shape (n_rows,)
        +1 for an upper limit, -1 for a lower limit, 0 for a measurement or count.
    counts : bool
        Whether `observed` are counts over `search_path`.
    search_path : ndarray, shape (n_rows,)
        Redshift or absorption path searched; NaN where the rows are not counts.
    log_nhi_lo, log_nhi_hi : ndarray, shape (n_rows,) [dex of cm^-2]
        Column bins of the rows; NaN where the quantity has none.
    labels : tuple of str
        Row labels; empty strings where the file gives none.
    lines : tuple of int
        Line of each row in the file, for messages.
    cosmology : Cosmology or None
        The cosmology that the file states.
    logarithmic : bool
        Whether `observed` and errors are in dex.
    covariance : ndarray, shape (n_rows, n_rows) [unit squared], or None
        Of the errors, where the file names one; its diagonal agrees with the errors.
    wavelength_lo, wavelength_hi : ndarray, shape (n_rows,) [Angstrom], or None
        Rest wavelengths of the rows, equal where a row is at a single one.
    role : ndarray of int, shape (n_rows,), or None
        What each row is; all are `MEASURED` where None.
    extras : mapping of str to ndarray
        What a quantity needs beside rows.
    linked : tuple of str
        Files that were read with it, such as its covariance.
    """

    name: str
    path: str
    quantity: str
    meta: Mapping[str, Any]
    unit: str
    z_lo: Array
    z_hi: Array
    observed: Array
    err_lo: Array
    err_hi: Array
    limit: NDArray[np.int64]
    counts: bool
    search_path: Array
    log_nhi_lo: Array
    log_nhi_hi: Array
    labels: tuple[str, ...]
    lines: tuple[int, ...]
    cosmology: Cosmology | None
    logarithmic: bool = False
    covariance: Array | None = None
    wavelength_lo: Array | None = None
    wavelength_hi: Array | None = None
    role: NDArray[np.int64] | None = None
    extras: Mapping[str, Array] = field(default_factory=dict)
    linked: tuple[str, ...] = ()

    @property
    def visible(self) -> NDArray[np.bool_]:
        """Rows that stand for a measurement or count of their own, shape (n_rows,)."""
        if self.role is None:
            return np.ones(self.n_rows, dtype=bool)
        return (self.role == MEASURED) | (self.role == SHOWN)

    @property
    def column_bins(self) -> Array:
        """Column bins in which absorbers were counted, shape (n_bins, 2) [dex of cm^-2]."""
        bins = np.stack([self.log_nhi_lo, self.log_nhi_hi], axis=1)[self.visible]
        return bins[np.isfinite(bins).all(axis=1)]

    @property
    def n_listed(self) -> int:
        """Number of rows, or absorbers, in the file."""
        return int(self.extras["n_absorbers"]) if "n_absorbers" in self.extras else self.n_rows

    @property
    def n_rows(self) -> int:
        """Number of rows."""
        return len(self.observed)

    @property
    def z(self) -> Array:
        """Middle of each row's redshift bin, shape (n_rows,)."""
        return 0.5 * (self.z_lo + self.z_hi)

    @property
    def source(self) -> str:
        """Where the numbers come from, as the file says."""
        return str(self.meta["source"])

    @property
    def confidence(self) -> float:
        """Confidence of the limits, between 0.5 and 1."""
        return float(self.meta["confidence"])


def hypothetical(quantity: str, z: ArrayLike, *, unit: str = "", **meta: Any) -> DataSet:
    """Return rows of a quantity that nobody measured, to predict a derived curve.

    Parameters
    ----------
    quantity : str
        Registry name.
    z : array_like, shape (n_rows,)
        Redshifts.
    unit : str
        Unit of the prediction.
    **meta
        Meta keys of the quantity.

    Returns
    -------
    DataSet
        Without observed values or cosmology: predictions are in the cosmology of the results.
    """
    z = np.array(z, dtype=float)
    silent = np.full(len(z), np.nan)
    return DataSet(
        name="hypothetical",
        path="",
        quantity=quantity,
        meta={"source": "", "confidence": 0.95, **meta},
        unit=unit,
        z_lo=z,
        z_hi=z,
        observed=silent,
        err_lo=silent,
        err_hi=silent,
        limit=np.zeros(len(z), dtype=np.int64),
        counts=False,
        search_path=silent,
        log_nhi_lo=silent,
        log_nhi_hi=silent,
        labels=("",) * len(z),
        lines=(0,) * len(z),
        cosmology=None,
    )
