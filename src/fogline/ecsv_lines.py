"""The raw text of an ECSV file taken apart with line numbers, and its table read by astropy.

An ECSV file is YAML behind ``#`` (columns, units, meta), a line of column names, and rows. astropy
reads it well but reports faults without lines and one at a time; here the text is split first, so
that every fault gets its line. Rows that astropy could not read are left out of what it is given:
the rest of the file is still validated.
"""

from __future__ import annotations

import re
import textwrap
import warnings
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from astropy import units
from astropy.cosmology import units as cosmology_units
from astropy.io import ascii as astropy_ascii
from astropy.table import Table
from numpy.typing import NDArray

from fogline.ecsv_cells import (
    FLOATS,
    INTEGERS,
    ManyRows,
    RawColumn,
    RawRow,
    read_numbers,
    read_rows,
    split_cells,
)
from fogline.faults import Fault, nearest
from fogline.yaml_lines import Document, parse_yaml

_FIRST_LINE: Final = re.compile(r"\s*#\s*%ECSV\s+\d+\.\d+(\.\d+)?\s*$")
_COMMENT: Final = re.compile(r"\s*#")
_HEADER_KEYS: Final = ("datatype", "delimiter", "meta", "schema")


@dataclass(frozen=True)
class RawTable:
    """An ECSV file as text: header, columns, rows, each with its line.

    Parameters
    ----------
    path : str
        The file.
    header : Document
        The YAML header.
    columns : tuple of RawColumn
        In the file's order.
    names_line : int
        Line of the column names above the rows.
    rows : tuple of RawRow
        Rows that can be read.
    n_left_out : int
        Rows that cannot; a fault says why.
    head : tuple of str
        Lines of the header and the column names.
    numbers : ndarray, shape (n_rows, n_columns), or None
        All rows at once, of a long file of numbers.
    """

    path: str
    header: Document
    columns: tuple[RawColumn, ...]
    names_line: int
    rows: Sequence[RawRow]
    n_left_out: int
    head: tuple[str, ...]
    numbers: NDArray[np.float64] | None = None

    @property
    def lines(self) -> tuple[int, ...]:
        """Line of each row."""
        if isinstance(self.rows, ManyRows):
            return self.rows.lines
        return tuple(row.line for row in self.rows)

    @property
    def meta(self) -> Any:
        """The header's ``meta`` as plain values."""
        return self.header.value.get("meta")

    def meta_line(self, *place: str) -> int:
        """Return the line of a key in ``meta``."""
        return self.header.line(("meta", *place))

    def column(self, name: str) -> RawColumn | None:
        """Return the column of that name, or None."""
        return next((column for column in self.columns if column.name == name), None)


def split_ecsv(path: str, text: str, faults: list[Fault]) -> RawTable | None:
    """Return the parts of an ECSV text, appending what is wrong to `faults`.

    Parameters
    ----------
    path : str
        The file, for the faults.
    text : str
        What it holds.
    faults : list of Fault
        Is appended to.

    Returns
    -------
    RawTable or None
        None where the header cannot be read.
    """
    lines = text.split("\n")
    n_header = _header_length(path, lines, faults)
    header = _read_header(path, lines[:n_header], faults) if n_header else None
    if header is None:
        return None
    columns = _read_columns(path, header, faults)
    body = [
        (n, line.strip())
        for n, line in enumerate(lines[n_header:], n_header + 1)
        if line.strip() and not _COMMENT.match(line)
    ]
    delimiter = header.value.get("delimiter", " ")
    if columns is None or not _names_agree(path, columns, body, delimiter, n_header, faults):
        return RawTable(path, header, (), n_header, (), 0, ())
    if not body[1:]:
        faults.append(
            Fault(path, body[0][0], "no rows below the column names; must be at least one")
        )
    numbers = read_numbers(columns, body[1:], delimiter)
    rows: Sequence[RawRow]
    if numbers is None:
        rows = read_rows(path, columns, body[1:], delimiter, faults)
    else:
        rows = ManyRows(body[1:], delimiter)
    head = tuple([line for line in lines[:n_header] if line.strip()] + [body[0][1]])
    left_out = len(body) - 1 - len(rows)
    return RawTable(path, header, columns, body[0][0], rows, left_out, head, numbers)


def read_table(raw: RawTable, faults: list[Fault]) -> Table | None:
    """Return the rows as astropy reads them, appending to `faults` where it cannot.

    Parameters
    ----------
    raw : RawTable
        From `split_ecsv`.
    faults : list of Fault
        Is appended to.

    Returns
    -------
    astropy.table.Table or None
        None where there is nothing to read.
    """
    # Serialized columns would make others than those that stand there.
    if not raw.rows or "__serialized_columns__" in (raw.meta or {}):
        return None
    if raw.numbers is not None:
        return Table({c.name: raw.numbers[:, i] for i, c in enumerate(raw.columns)}, copy=False)
    lines = [*raw.head, *(row.text for row in raw.rows)]
    try:
        with warnings.catch_warnings(), units.add_enabled_units(cosmology_units):
            warnings.simplefilter("error")
            return astropy_ascii.read(lines, format="ecsv", guess=False)
    except Exception as error:  # whatever the text made astropy stumble over is the user's fault
        reason = " ".join(str(error).split())[:200]
        faults.append(Fault(raw.path, 1, f"is not readable as ECSV: {reason}"))
        return None


def _header_length(path: str, lines: list[str], faults: list[Fault]) -> int:
    """Return how many lines the header has; 0 where there is none."""
    if not any(line.strip() for line in lines):
        faults.append(Fault(path, 1, "is empty; a constraint file is ECSV ('# %ECSV 1.0' first)"))
        return 0
    first = next(n for n, line in enumerate(lines) if line.strip())
    if not _FIRST_LINE.match(lines[first]):
        found = lines[first].strip()[:60]
        what = f"first line must be '# %ECSV 1.0' of an ECSV file, found {found!r}"
        faults.append(Fault(path, first + 1, what))
        return 0
    ends = (n for n, line in enumerate(lines) if line.strip() and not _COMMENT.match(line))
    return next(ends, len("\n".join(lines).rstrip().split("\n")))


def _read_header(path: str, lines: list[str], faults: list[Fault]) -> Document | None:
    # Blank lines stay, so that YAML's line numbers are those of the file.
    bare = [_COMMENT.sub("", line.strip(), count=1) for line in lines]
    bare = ["" if line.strip().startswith("%ECSV") else line for line in bare]
    header = parse_yaml(textwrap.dedent("\n".join(bare)), path, faults)
    if header is None:
        return None
    if not isinstance(header.value, dict):
        faults.append(Fault(path, 1, "ECSV header must have the keys 'datatype' and 'meta'"))
        return None
    for key in sorted(set(header.value) - set(_HEADER_KEYS)):
        what = f"unknown key '{key}' beside 'meta' in the ECSV header; {_header_hint(key)}"
        faults.append(Fault(path, header.line((key,)), what))
    delimiter = header.value.get("delimiter", " ")
    if delimiter not in (" ", ","):
        what = f"delimiter is {delimiter!r}, allowed: ' ' or ','"
        faults.append(Fault(path, header.line(("delimiter",)), what))
        return None
    return header


def _header_hint(key: str) -> str:
    near = nearest(key, _HEADER_KEYS)
    return (
        near if near.startswith("did") else "keys of the data set belong (indented) under 'meta:'"
    )


def _read_columns(path: str, header: Document, faults: list[Fault]) -> tuple[RawColumn, ...] | None:
    declared = header.value.get("datatype")
    if not isinstance(declared, list) or not declared:
        what = "ECSV header must list the columns under 'datatype'"
        faults.append(Fault(path, header.line(("datatype",)), what))
        return None
    before = len(faults)
    columns = [
        _read_column(path, item, header.line(("datatype", i)), faults)
        for i, item in enumerate(declared)
    ]
    seen: dict[str, int] = {}
    for column in columns:
        if column.name in seen:
            what = f"column '{column.name}' stands twice, first in line {seen[column.name]}"
            faults.append(Fault(path, column.line, what))
        seen.setdefault(column.name, column.line)
    return tuple(columns) if len(faults) == before else None


def _read_column(path: str, item: Any, line: int, faults: list[Fault]) -> RawColumn:
    item = item if isinstance(item, Mapping) else {}
    name, datatype, unit = item.get("name"), item.get("datatype"), item.get("unit", "")
    if not isinstance(name, str) or not name:
        faults.append(Fault(path, line, "a column under 'datatype' needs 'name: text'"))
    elif datatype not in (*FLOATS, *INTEGERS, "string", "bool") or item.get("subtype"):
        what = f"column '{name}' has datatype {datatype!r}, allowed: float64, int64, string"
        faults.append(Fault(path, line, what))
    elif not isinstance(unit, str | None):
        faults.append(Fault(path, line, f"unit of column '{name}' must be text, found {unit!r}"))
    return RawColumn(str(name), str(datatype), unit if isinstance(unit, str) else "", line)


def _names_agree(
    path: str,
    columns: tuple[RawColumn, ...],
    body: list[tuple[int, str]],
    delimiter: str,
    n_header: int,
    faults: list[Fault],
) -> bool:
    declared = [column.name for column in columns]
    if not body:
        what = f"no rows; after the header come a line '{delimiter.join(declared)}' and the rows"
        faults.append(Fault(path, n_header, what))
        return False
    line, text = body[0]
    found = split_cells(text, delimiter)
    if found != declared:
        what = (
            f"column names are {_join(found)}, but the header declares {_join(declared)}; "
            "must be the same in the same order"
        )
        faults.append(Fault(path, line, what))
    return found == declared


def _join(words: list[str]) -> str:
    return f"'{' '.join(words)}'"
