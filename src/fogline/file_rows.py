"""Validation of a constraint file's rows against its quantity's `FileSpec`."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any, Final

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

from fogline.ecsv_lines import RawTable
from fogline.faults import Fault
from fogline.file_units import in_angstrom
from fogline.quantities.spec import LOG_NHI_RANGE, FileSpec, ValueColumn, interval

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

MOST_FAULTS: Final = 100
"""Rows of one column that are reported one by one."""

HIGHEST_REDSHIFT: Final = 20.0
LIMITS: Final[Mapping[str, int]] = {"": 0, "upper": 1, "lower": -1}


class Rows:
    """The rows of one file as arrays, and the checks on them.

    Parameters
    ----------
    raw : RawTable
        The file.
    table : astropy.table.Table
        Its rows as astropy reads them.
    faults : list of Fault
        Is appended to.
    """

    def __init__(self, raw: RawTable, table: Table, faults: list[Fault]) -> None:
        self._raw = raw
        self._table = table
        self._faults = faults

    @property
    def raw(self) -> RawTable:
        """The file."""
        return self._raw

    @property
    def lines(self) -> tuple[int, ...]:
        """Line of each row."""
        return self._raw.lines

    def has(self, name: str) -> bool:
        """Return whether the file has a column."""
        return name in self._table.colnames

    def numbers(self, name: str) -> Array:
        """Return a column of numbers, NaN where a cell is empty or the column is absent."""
        if not self.has(name):
            return np.full(len(self._table), np.nan)
        column = np.ma.asarray(self._table[name]).astype(float)
        return np.asarray(np.ma.filled(column, np.nan), dtype=float)

    def texts(self, name: str) -> tuple[str, ...]:
        """Return a column of text, empty where a cell is empty or the column is absent."""
        if not self.has(name):
            return ("",) * len(self._table)
        return tuple("" if cell is np.ma.masked else str(cell) for cell in self._table[name])

    def cell(self, name: str, row: int) -> str:
        """Return a cell as the file writes it."""
        return self._raw.rows[row].cells[self._table.colnames.index(name)]

    def fault_where(self, bad: Mask, name: str, must: str | Callable[[int], str]) -> None:
        """Add one fault for each bad row of a column.

        Parameters
        ----------
        bad : ndarray of bool, shape (n_rows,)
            Where the column's number is wrong.
        name : str
            The column.
        must : str or callable
            What is allowed; of the row where it depends on it.
        """
        rows = np.flatnonzero(bad)
        lines = self.lines if len(rows) else ()
        for row in map(int, rows[:MOST_FAULTS]):
            found = self.cell(name, row)
            found = f"is {found}" if found else "is empty"
            allowed = must if isinstance(must, str) else must(row)
            what = f"{name} {found}, must be {allowed}"
            self._faults.append(Fault(self._raw.path, lines[row], what))
        if len(rows) > MOST_FAULTS:
            what = f"{name}: {len(rows) - MOST_FAULTS} more rows are wrong in the same way"
            self._faults.append(Fault(self._raw.path, lines[int(rows[MOST_FAULTS])], what))

    def between(
        self,
        name: str,
        minimum: float,
        maximum: float,
        *,
        where: Mask | None = None,
        closed: bool = False,
        hint: str = "",
    ) -> Array:
        """Return a column after checking that its numbers are finite and in a range.

        Parameters
        ----------
        name : str
            The column, which the file has.
        minimum, maximum : float
            The range.
        where : ndarray of bool, shape (n_rows,), optional
            Rows to check; all where not given.
        closed : bool
            Whether both ends are allowed.
        hint : str
            Added to what is allowed.

        Returns
        -------
        ndarray, shape (n_rows,)
        """
        x = self.numbers(name)
        inside = (x >= minimum) & (x <= maximum) if closed else (x > minimum) & (x < maximum)
        bad = ~(inside & np.isfinite(x))
        bad = bad if where is None else bad & where
        self.fault_where(bad, name, interval(minimum, maximum, not closed) + hint)
        return x

    def ordered(self, low_name: str, high_name: str) -> None:
        """Check that one column is smaller than the other in every row."""
        low, high = self.numbers(low_name), self.numbers(high_name)
        bad = np.isfinite(low) & np.isfinite(high) & ~(low < high)
        self.fault_where(
            bad, high_name, lambda row: f"greater than {low_name} = {self.cell(low_name, row)}"
        )


def check_rows(
    rows: Rows, spec: FileSpec, value: ValueColumn | None, counts: bool, meta: Mapping[str, Any]
) -> dict[str, Any]:
    """Return the arrays of a `fogline.datasets.DataSet`, with faults appended by `rows`.

    Parameters
    ----------
    rows : Rows
        The file's rows.
    spec : FileSpec
        The quantity's specification.
    value : ValueColumn or None
        The measured column's specification; None where the file does not say its form.
    counts : bool
        Whether the rows are counts.
    meta : mapping
        The file's meta with defaults.

    Returns
    -------
    dict
        Keyword arguments of `DataSet` that hold one entry a row.
    """
    z_lo, z_hi = _check_redshifts(rows)
    log_nhi_lo, log_nhi_hi = _check_column_bins(rows, spec)
    measured = _check_counts(rows) if counts else _check_values(rows, value, meta)
    wavelengths = _check_wavelengths(rows) if spec.wavelengths else {}
    return {
        **wavelengths,
        "z_lo": z_lo,
        "z_hi": z_hi,
        "log_nhi_lo": log_nhi_lo,
        "log_nhi_hi": log_nhi_hi,
        "labels": rows.texts("label"),
        "lines": rows.lines,
        **measured,
    }


def _check_redshifts(rows: Rows) -> tuple[Array, Array]:
    def redshift(name: str) -> Array:
        z = rows.numbers(name)
        bad = ~((z > 0.0) & (z <= HIGHEST_REDSHIFT))
        rows.fault_where(bad, name, f"a redshift in (0, {HIGHEST_REDSHIFT:g}]")
        return z

    if rows.has("z"):
        z = redshift("z")
        return z, z.copy()
    edges = redshift("z_lo"), redshift("z_hi")
    rows.ordered("z_lo", "z_hi")
    return edges


def _check_wavelengths(rows: Rows) -> dict[str, Array]:
    if rows.has("wavelength"):
        single = rows.between("wavelength", 0.0, np.inf) * in_angstrom(rows.raw, "wavelength")
        return {"wavelength_lo": single, "wavelength_hi": single.copy()}
    edges = {
        name: rows.between(name, 0.0, np.inf) * in_angstrom(rows.raw, name)
        for name in ("wavelength_lo", "wavelength_hi")
    }
    low, high = edges.values()  # compared in Angstrom: the two may have different units
    bad = np.isfinite(low) & np.isfinite(high) & ~(low < high)
    rows.fault_where(
        bad,
        "wavelength_hi",
        lambda row: f"greater than wavelength_lo = {rows.cell('wavelength_lo', row)}",
    )
    return edges


def _check_column_bins(rows: Rows, spec: FileSpec) -> tuple[Array, Array]:
    if not spec.column_bins:
        return rows.numbers("log_nhi_lo"), rows.numbers("log_nhi_hi")
    edges = (
        rows.between("log_nhi_lo", *LOG_NHI_RANGE, closed=True),
        rows.between("log_nhi_hi", *LOG_NHI_RANGE, closed=True),
    )
    rows.ordered("log_nhi_lo", "log_nhi_hi")
    return edges


def _check_counts(rows: Rows) -> dict[str, Any]:
    count = rows.numbers("count")
    whole = np.isfinite(count) & (count >= 0.0) & (count == np.floor(count))
    rows.fault_where(~whole, "count", "a whole number >= 0")
    path = rows.between("path", 0.0, np.inf)
    none = np.full(len(count), np.nan)
    return {
        "observed": count,
        "err_lo": none,
        "err_hi": none.copy(),
        "limit": np.zeros(len(count), dtype=np.int64),
        "search_path": path,
    }


def _check_values(rows: Rows, value: ValueColumn | None, meta: Mapping[str, Any]) -> dict[str, Any]:
    limit = _check_limits(rows)
    if value is None:
        name, low, high = "value", -np.inf, np.inf
    else:
        name, low, high = value.name, value.minimum, value.maximum
    observed = rows.between(name, low, high)
    # A limit without an error is taken as sharp as its confidence says, which needs a linear
    # scale with a zero: in logarithms the width must be given.
    free = value is None or not (value.logarithmic or meta.get("likelihood") == "lognormal")
    free = free or (value is not None and value.bare_limits)
    may_lack = (limit != 0) & free
    err_lo, err_hi = _check_errors(rows, name, may_lack)
    return {
        "observed": observed,
        "err_lo": err_lo,
        "err_hi": err_hi,
        "limit": limit,
        "search_path": np.full(len(observed), np.nan),
    }


def _check_limits(rows: Rows) -> NDArray[np.int64]:
    texts = rows.texts("limit")
    bad = np.array([text not in LIMITS for text in texts], dtype=bool)
    rows.fault_where(bad, "limit", 'upper, lower or empty ("")')
    return np.array([LIMITS.get(text, 0) for text in texts], dtype=np.int64)


def _check_errors(rows: Rows, value_name: str, may_lack: Mask) -> tuple[Array, Array]:
    names = ("err", "err") if rows.has("err") else ("err_lo", "err_hi")
    if not rows.has(names[0]):
        hint = "a limit, or have an error (column 'err')"
        rows.fault_where(~may_lack, value_name, hint)
    else:
        for name in dict.fromkeys(names):
            stated = ~(may_lack & np.isnan(rows.numbers(name)))
            rows.between(name, 0.0, np.inf, where=stated)
    return rows.numbers(names[0]), rows.numbers(names[1])
