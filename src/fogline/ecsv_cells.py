"""Rows of an ECSV file split into cells, each checked to hold what its column declares."""

from __future__ import annotations

import csv
import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fogline.faults import Fault

_INTEGER: Final = re.compile(r"[+-]?\d{1,18}")
_FLOAT: Final = re.compile(r"[+-]?((\d+\.?\d*|\.\d+)([eE][+-]?\d{1,3})?|inf|nan)", re.IGNORECASE)

MANY: Final = 5000
"""Rows from which on a file of numbers is read at once."""

FLOATS: Final = ("float16", "float32", "float64")
INTEGERS: Final = ("int8", "int16", "int32", "int64", "uint8", "uint16", "uint32", "uint64")


@dataclass(frozen=True)
class RawColumn:
    """One column as the header declares it.

    Parameters
    ----------
    name, datatype, unit : str
        As written; `unit` is empty where none is stated.
    line : int
        Line of the declaration.
    """

    name: str
    datatype: str
    unit: str
    line: int

    @property
    def numeric(self) -> bool:
        """Whether the column is declared to hold numbers."""
        return self.datatype in FLOATS + INTEGERS


@dataclass(frozen=True)
class RawRow:
    """One row as text, with its line."""

    line: int
    text: str
    cells: tuple[str, ...]


def split_cells(text: str, delimiter: str) -> list[str]:
    """Return the cells of one row, split as astropy does; none where its quotes do not match.

    Parameters
    ----------
    text : str
        The row.
    delimiter : str
        Between the cells.

    Returns
    -------
    list of str
    """
    reader = csv.reader([text], delimiter=delimiter, skipinitialspace=True, strict=True)
    try:
        return [cell.strip(" \t") for cell in next(reader, [])]
    except csv.Error:
        return []


def read_rows(
    path: str,
    columns: tuple[RawColumn, ...],
    body: list[tuple[int, str]],
    delimiter: str,
    faults: list[Fault],
) -> tuple[RawRow, ...]:
    """Return the rows that can be read, appending to `faults` what is wrong with the others.

    Parameters
    ----------
    path : str
        The file, for the faults.
    columns : tuple of RawColumn
        As the header declares them.
    body : list of (int, str)
        Line and text of each row.
    delimiter : str
        Between the cells.
    faults : list of Fault
        Is appended to.

    Returns
    -------
    tuple of RawRow
    """
    rows = []
    for line, text in body:
        cells = split_cells(text, delimiter)
        found = _row_faults(columns, cells)
        faults.extend(Fault(path, line, what) for what in found)
        if not found:
            rows.append(RawRow(line, text, tuple(cells)))
    return tuple(rows)


class ManyRows(Sequence[RawRow]):
    """Rows of a long file, split into cells only where somebody asks for one.

    Parameters
    ----------
    body : list of (int, str)
        Line and text of each row, all of them good.
    delimiter : str
        Between the cells.
    """

    def __init__(self, body: list[tuple[int, str]], delimiter: str) -> None:
        self._body = body
        self._delimiter = delimiter

    def __len__(self) -> int:
        return len(self._body)

    def __getitem__(self, index: Any) -> Any:
        if isinstance(index, slice):
            return [self[i] for i in range(*index.indices(len(self)))]
        line, text = self._body[index]
        return RawRow(line, text, tuple(split_cells(text, self._delimiter)))

    @property
    def lines(self) -> tuple[int, ...]:
        """Line of each row."""
        return tuple(line for line, _ in self._body)


def read_numbers(
    columns: tuple[RawColumn, ...], body: list[tuple[int, str]], delimiter: str
) -> NDArray[np.float64] | None:
    """Return the rows of a long file of numbers, read at once.

    Parameters
    ----------
    columns : tuple of RawColumn
    body : list of (int, str)
        Line and text of each row.
    delimiter : str

    Returns
    -------
    ndarray, shape (n_rows, n_columns), or None
        None where the file is short, has columns of text, or has any row that is not simply
        numbers: then rows have to be looked at one by one.
    """
    if len(body) < MANY or not all(column.numeric for column in columns):
        return None
    try:
        numbers = np.loadtxt(
            [text for _, text in body], delimiter=None if delimiter == " " else delimiter, ndmin=2
        )
    except ValueError:
        return None
    return numbers if numbers.shape == (len(body), len(columns)) else None


def _row_faults(columns: tuple[RawColumn, ...], cells: list[str]) -> list[str]:
    if not cells:
        return ['quotes of this row do not match; a cell is written "in double quotes"']
    if len(cells) != len(columns):
        n, m = len(cells), len(columns)
        return [f'row has {n} cells, must have {m}, one for each of the columns (empty: "")']
    return [
        f"{column.name} is '{cell[:60]}', must be {_kind(column)}"
        for column, cell in zip(columns, cells, strict=True)
        if cell and not _readable(column, cell)
    ]


def _kind(column: RawColumn) -> str:
    if column.datatype == "bool":
        return "True or False"
    return "a number" if column.datatype in FLOATS else f"a whole number ({column.datatype})"


def _readable(column: RawColumn, cell: str) -> bool:
    if column.datatype in FLOATS:
        return bool(_FLOAT.fullmatch(cell))
    if column.datatype in INTEGERS:
        return bool(_INTEGER.fullmatch(cell)) and _fits(column.datatype, int(cell))
    return column.datatype != "bool" or cell in ("True", "False")


def _fits(datatype: str, number: int) -> bool:
    bits = int(datatype.removeprefix("u").removeprefix("int"))
    if datatype.startswith("u"):
        return 0 <= number < 2**bits
    return -(2 ** (bits - 1)) <= number < 2 ** (bits - 1)
