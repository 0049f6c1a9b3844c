"""Rows of an ECSV file split into cells, each checked to hold what its column declares."""

from __future__ import annotations

import csv
import re
from dataclasses import dataclass
from typing import Final

from fogline.faults import Fault

_INTEGER: Final = re.compile(r"[+-]?\d{1,18}")
_FLOAT: Final = re.compile(r"[+-]?((\d+\.?\d*|\.\d+)([eE][+-]?\d{1,3})?|inf|nan)", re.IGNORECASE)

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
