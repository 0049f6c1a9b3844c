"""Covariance files: which errors of a constraint file are correlated, and how much.

An ECSV file with columns ``row``, ``column`` (numbers of the constraint file's rows, from 0) and
either ``covariance`` (unit: that of the values squared; none where they are in dex) or
``correlation``. One triangle is enough, the other mirrors it; pairs that are not listed are zero,
and the diagonal of a correlation file need not be listed. The diagonal of a covariance must agree
with the errors in the constraint file to `TOLERANCE`, which finds wrong units and orders.
"""

from __future__ import annotations

from typing import Any, Final

import numpy as np
from astropy import units
from astropy.cosmology import units as cosmology_units
from numpy.typing import NDArray

from fogline.ecsv_lines import RawTable, read_table, split_ecsv
from fogline.faults import Fault, InputError
from fogline.file_rows import Rows
from fogline.text_files import read_text

Array = NDArray[np.float64]

TOLERANCE: Final = 0.02
"""Largest relative difference between an error and the root of its diagonal entry."""


def read_covariance(
    path: str, unit: str, arrays: dict[str, Any], faults: list[Fault]
) -> Array | None:
    """Return the covariance of a constraint file's rows, appending what is wrong to `faults`.

    Parameters
    ----------
    path : str
        The covariance file.
    unit : str
        Unit of the constraint file's values; empty where dimensionless or in dex.
    arrays : dict
        Rows of the constraint file, as `fogline.file_rows.check_rows` returns them.
    faults : list of Fault
        Is appended to.

    Returns
    -------
    ndarray, shape (n_rows, n_rows) [unit squared], or None
        None where there is a fault.
    """
    before = len(faults)
    try:
        raw = split_ecsv(path, read_text(path), faults)
    except InputError as error:
        faults.extend(error.faults)
        return None
    if raw is None or not _good_columns(raw, unit, faults):
        return None
    table = read_table(raw, faults)
    if table is None or len(faults) > before:
        return None
    rows = Rows(raw, table, faults)
    matrix = _matrix(rows, raw, unit, arrays["err_hi"], faults)
    if len(faults) == before:
        _check_matrix(matrix, raw, arrays["err_hi"], faults)
    return matrix if len(faults) == before else None


def _good_columns(raw: RawTable, unit: str, faults: list[Fault]) -> bool:
    before = len(faults)
    names = {column.name for column in raw.columns}
    values = names & {"covariance", "correlation"}
    for what in [f"lacks column '{name}'" for name in ("row", "column") if name not in names]:
        faults.append(Fault(raw.path, raw.header.line(("datatype",)), what))
    if len(values) != 1:
        found = "both" if values else "neither"
        what = f"must have exactly one of the columns covariance and correlation, has {found}"
        faults.append(Fault(raw.path, raw.header.line(("datatype",)), what))
    for column in raw.columns:
        if column.name not in ("row", "column", "covariance", "correlation"):
            what = f"unknown column '{column.name}'; allowed: row, column, covariance, correlation"
        elif not column.numeric:
            what = f"datatype of column '{column.name}' is {column.datatype}, must be a number"
        elif column.name == "covariance" and unit:
            if _factor(column.unit, unit) is not None:
                continue
            found = f"'{column.unit}'" if column.unit else "missing"
            what = f"unit of column 'covariance' is {found}, must convert to ({unit})^2"
        elif column.unit:
            what = f"unit of column '{column.name}' is '{column.unit}', must be none"
        else:
            continue
        faults.append(Fault(raw.path, column.line, what))
    return len(faults) == before


def _factor(text: str, unit: str) -> float | None:
    """Return what brings a covariance to the square of the data's unit; None where nothing does."""
    with units.add_enabled_units(cosmology_units):
        try:
            return float(units.Unit(text).to(units.Unit(unit) ** 2))
        except (ValueError, TypeError, units.UnitConversionError):
            return None


def _matrix(rows: Rows, raw: RawTable, unit: str, errors: Array, faults: list[Fault]) -> Array:
    n = len(errors)
    i, j = (_indices(rows, name, n) for name in ("row", "column"))
    correlated = rows.has("correlation")
    if correlated:
        values = rows.between("correlation", -1.0, 1.0, closed=True)
    else:
        values = rows.between("covariance", -np.inf, np.inf)
        column = raw.column("covariance")
        factor = _factor(column.unit, unit) if unit and column is not None else 1.0
        values = values * (factor or 1.0)
    if (i < 0).any() or (j < 0).any():
        return np.eye(n)
    matrix = np.full((n, n), np.nan)
    for line, a, b, value in zip(rows.lines, i, j, values, strict=True):
        known = matrix[a, b]
        if not (np.isnan(known) or np.isclose(known, value, rtol=1e-6, atol=0.0)):
            what = f"row {a}, column {b} is {value:g}, but was {known:g} before: not symmetric"
            faults.append(Fault(raw.path, line, what))
        matrix[a, b] = matrix[b, a] = value
    diagonal = np.diagonal(matrix)
    missing = np.flatnonzero(np.isnan(diagonal))
    if correlated:
        matrix[missing, missing] = 1.0
        return np.nan_to_num(matrix) * np.outer(errors, errors)
    if len(missing):
        listed = ", ".join(map(str, missing[:10])) + (" ..." if len(missing) > 10 else "")
        faults.append(Fault(raw.path, raw.names_line, f"lacks the variance of rows {listed}"))
    return np.nan_to_num(matrix)


def _indices(rows: Rows, name: str, n_rows: int) -> NDArray[np.int64]:
    """Return row numbers, -1 where one is wrong."""
    x = rows.numbers(name)
    good = np.isfinite(x) & (x == np.floor(x)) & (x >= 0) & (x < n_rows)
    rows.fault_where(~good, name, f"a row of the constraint file, 0 to {n_rows - 1}")
    return np.where(good, x, -1).astype(np.int64)


def _check_matrix(matrix: Array, raw: RawTable, errors: Array, faults: list[Fault]) -> None:
    sigma = np.sqrt(np.maximum(np.diagonal(matrix), 0.0))
    off = np.abs(sigma / errors - 1.0)
    if not (off <= TOLERANCE).all():
        worst = int(np.nan_to_num(off, nan=np.inf).argmax())
        what = (
            f"the root of the diagonal at row {worst} is {sigma[worst]:.4g}, must agree within "
            f"{TOLERANCE:.0%} with the error {errors[worst]:.4g} in the constraint file"
        )
        faults.append(Fault(raw.path, raw.names_line, what))
        return
    smallest = float(np.linalg.eigvalsh(matrix / np.outer(sigma, sigma)).min())
    if not smallest > 1e-10:
        what = (
            f"is not positive definite: the least eigenvalue of its correlations is {smallest:.3g},"
            " must be positive"
        )
        faults.append(Fault(raw.path, raw.names_line, what))
