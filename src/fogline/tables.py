"""Tables with bands, units and provenance, written as ECSV in one step."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

Array = NDArray[np.float64]

BAND_QUANTILES = {"median": 0.5, "lo68": 0.16, "hi68": 0.84, "lo95": 0.025, "hi95": 0.975}
"""Band columns: quantiles of the quantity's own posterior."""


@dataclass(frozen=True)
class Curve:
    """One derived quantity along the rows of a table, for every draw.

    Parameters
    ----------
    values : ndarray, shape (n_draws, n_rows)
    unit : str
        astropy unit string; empty where dimensionless.
    description : str
        Definition, one sentence.
    """

    values: Array
    unit: str
    description: str


def bands(values: Array) -> dict[str, Array]:
    """Return the band columns of draws.

    Parameters
    ----------
    values : ndarray, shape (n_draws, n_rows)
        May hold +inf (beyond reach), never NaN.

    Returns
    -------
    dict of str to ndarray, shape (n_rows,)
    """
    probabilities = list(BAND_QUANTILES.values())
    if np.isfinite(values).all():
        quantiles = np.quantile(values, probabilities, axis=0)
    else:
        # Interpolation between a finite and an infinite neighbour would give NaN.
        quantiles = np.quantile(values, probabilities, axis=0, method="inverted_cdf")
    return dict(zip(BAND_QUANTILES, quantiles, strict=True))


def curve_table(
    keys: Mapping[str, tuple[Array, str, str]], curves: Mapping[str, Curve], *, with_bands: bool
) -> Table:
    """Return a table of key columns and curves.

    Parameters
    ----------
    keys : mapping of str to (ndarray, unit, description)
        Leading columns.
    curves : mapping of str to Curve
        One curve gives plain band columns; several are prefixed by their names.
    with_bands : bool
        Bands over draws; else the single draw's values, in columns named by the curves.

    Returns
    -------
    astropy.table.Table
    """
    table = Table()
    for name, (values, unit, description) in keys.items():
        _add(table, name, values, unit, description)
    for name, curve in curves.items():
        if not with_bands:
            _add(table, name, curve.values[0], curve.unit, curve.description)
            continue
        prefix = f"{name}_" if len(curves) > 1 else ""
        for band, values in bands(curve.values).items():
            _add(table, prefix + band, values, curve.unit, f"{curve.description} ({band})")
    return table


def _add(table: Table, name: str, values: Any, unit: str, description: str) -> None:
    table[name] = values
    table[name].unit = unit or None
    table[name].description = description


def write_table(table: Table, path: str | Path, **meta: Any) -> None:
    """Write a table as ECSV, whole or not at all.

    Parameters
    ----------
    table : astropy.table.Table
    path : path-like
    **meta
        Added to the table's meta.
    """
    out = Table(table, copy=False)
    out.meta = {**table.meta, **meta}
    for name in out.colnames:
        if out[name].dtype.kind == "f":
            out[name].info.format = ".8g"
    write_whole(path, lambda temporary: out.write(temporary, format="ascii.ecsv", overwrite=True))


def write_whole(path: str | Path, write: Callable[[Path], object]) -> None:
    """Let `write` fill a temporary file beside `path`, then move it there in one step.

    Parameters
    ----------
    path : path-like
        Its folder is made where missing.
    write : callable
        Takes the temporary path, whose suffix is that of `path`.
    """
    path = Path(path)
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.stem}-", suffix=path.suffix)
    os.close(handle)
    temporary = Path(name)
    try:
        write(temporary)
        # mkstemp makes private files; results are as readable as any new file.
        mask = os.umask(0)
        os.umask(mask)
        temporary.chmod(0o666 & ~mask)
        temporary.replace(path)
    finally:
        temporary.unlink(missing_ok=True)


def read_table(path: str | Path) -> Table:
    """Read an ECSV table."""
    return Table.read(path, format="ascii.ecsv")
