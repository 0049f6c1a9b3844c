"""Small tables beside the constraint files: filter curves, survey paths, photoionization rates.

Each is ECSV with ``kind`` in its meta, and columns with units, which are brought to fogline's own.
What each kind holds stands in `SIDE_TABLES`; reading, faults and templates follow from it.
"""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from astropy import units
from numpy.typing import NDArray

from fogline.ecsv_lines import RawColumn, RawTable, read_table, split_ecsv
from fogline.faults import Fault, InputError, nearest
from fogline.file_rows import Rows
from fogline.text_files import read_text

Array = NDArray[np.float64]


@dataclass(frozen=True)
class SideColumn:
    """One column of a side table.

    Parameters
    ----------
    name : str
    help : str
        What it holds.
    examples : tuple of float
        Numbers of the template.
    unit : str
        Unit to which it is brought; empty where it must have none.
    minimum, maximum : float
        Closed range, in that unit.
    optional : bool
        Whether the table may lack it.
    """

    name: str
    help: str
    examples: tuple[float, ...]
    unit: str = ""
    minimum: float = 0.0
    maximum: float = float("inf")
    optional: bool = False


@dataclass(frozen=True)
class SideTable:
    """What one kind of side table holds.

    Parameters
    ----------
    kind : str
        Value of ``kind`` in its meta.
    description : str
        One sentence for the template.
    columns : tuple of SideColumn
    increasing : str
        Column that must increase from row to row; empty where order means nothing.
    ordered : tuple of str
        Two columns of which the first must be smaller; empty where there are none.
    """

    kind: str
    description: str
    columns: tuple[SideColumn, ...]
    increasing: str = ""
    ordered: tuple[str, ...] = ()


_Z: Final = SideColumn("z", "redshift", (2.5, 3.5, 4.5), maximum=20.0)

SIDE_TABLES: Final[dict[str, SideTable]] = {
    table.kind: table
    for table in (
        SideTable(
            "filter",
            "Throughput of a filter against observed wavelength, linear between rows.",
            (
                SideColumn(
                    "wavelength",
                    "at the observer",
                    (3300.0, 3400.0, 3800.0, 3900.0),
                    "Angstrom",
                ),
                SideColumn("throughput", "relative photon throughput", (0.0, 0.8, 0.8, 0.0)),
            ),
            increasing="wavelength",
        ),
        SideTable(
            "sightlines",
            "Survey path: the redshifts that every sightline covers.",
            (
                SideColumn("z_start", "lower end", (2.1, 2.3, 2.0), maximum=20.0),
                SideColumn("z_end", "upper end", (2.9, 3.4, 3.1), maximum=20.0),
                SideColumn("sightline", "its number, as in the list", (1.0, 2.0), optional=True),
            ),
            ordered=("z_start", "z_end"),
        ),
        SideTable(
            "sensitivity",
            "Survey path: how many sightlines cover a redshift, linear between rows.",
            (
                SideColumn("z", "redshift", (2.0, 2.4, 3.0, 3.5), maximum=20.0),
                SideColumn("g", "number of sightlines", (0.0, 120.0, 90.0, 0.0)),
            ),
            increasing="z",
        ),
        SideTable(
            "completeness",
            "Completeness of a list of absorbers against true column density, linear between rows.",
            (
                SideColumn(
                    "log_nhi", "log10(N / cm^-2)", (20.0, 20.3, 20.6), minimum=8.0, maximum=26.0
                ),
                SideColumn("completeness", "found share", (0.6, 0.9, 1.0), maximum=1.0),
            ),
            increasing="log_nhi",
        ),
        SideTable(
            "photoionization_rate",
            "Photoionization rate of H I by the ionizing background.",
            (
                _Z,
                SideColumn("value", "rate", (1.0e-12, 9.0e-13, 7.0e-13), "1 / s"),
                SideColumn("err", "one sigma", (2.0e-13, 2.0e-13, 2.0e-13), "1 / s"),
            ),
            increasing="z",
        ),
        SideTable(
            "mean_intensity",
            "Mean intensity of the ionizing background at the Lyman limit.",
            (
                _Z,
                SideColumn(
                    "value",
                    "mean intensity at 912 Angstrom",
                    (4.0e-22, 3.6e-22, 3.0e-22),
                    "erg / (s Hz cm2 sr)",
                ),
                SideColumn("err", "one sigma", (1.0e-22, 9.0e-23, 9.0e-23), "erg / (s Hz cm2 sr)"),
            ),
            increasing="z",
        ),
        SideTable(
            "emissivity",
            "Comoving emissivity of ionizing sources at the Lyman limit.",
            (
                _Z,
                SideColumn(
                    "value",
                    "emissivity at 912 Angstrom",
                    (1.5e25, 1.3e25, 1.2e25),
                    "erg / (s Hz Mpc3)",
                ),
                SideColumn("err", "one sigma", (3e24, 3e24, 3e24), "erg / (s Hz Mpc3)"),
            ),
            increasing="z",
        ),
    )
}
"""Every kind of side table by its name."""


def read_side_table(path: str | os.PathLike[str], kind: str = "") -> dict[str, Array]:
    """Return the columns of a side table in fogline's units.

    Parameters
    ----------
    path : path-like
    kind : str, optional
        What it must be; whatever its meta says by default.

    Returns
    -------
    dict of str to ndarray, shape (n_rows,)
        Optional columns that it lacks are left out.

    Raises
    ------
    InputError
        With every fault of the file.
    """
    path = os.fspath(path)
    faults: list[Fault] = []
    raw = split_ecsv(path, read_text(path), faults)
    spec = None if raw is None else _find_spec(raw, kind, faults)
    columns: dict[str, Array] = {}
    if raw is not None and spec is not None and _good_columns(raw, spec, faults):
        table = read_table(raw, faults)
        if table is not None:
            columns = _values(Rows(raw, table, faults), spec)
    if faults:
        raise InputError(faults)
    return columns


def side_kind(path: str) -> str:
    """Return the kind of side table that a file says it is; empty where it is none."""
    try:
        raw = split_ecsv(path, read_text(path), [])
    except InputError:
        return ""
    meta = None if raw is None else raw.meta
    return str(meta["kind"]) if isinstance(meta, Mapping) and "kind" in meta else ""


def _find_spec(raw: RawTable, kind: str, faults: list[Fault]) -> SideTable | None:
    meta: Any = raw.meta
    found = meta.get("kind") if isinstance(meta, Mapping) else None
    if found is None:
        must = kind or " | ".join(SIDE_TABLES)
        faults.append(Fault(raw.path, raw.meta_line(), f"meta lacks 'kind', must be {must}"))
    elif found not in SIDE_TABLES:
        what = f"unknown kind {found!r}; {nearest(str(found), SIDE_TABLES)}"
        faults.append(Fault(raw.path, raw.meta_line("kind"), what))
    elif kind and found != kind:
        faults.append(Fault(raw.path, raw.meta_line("kind"), f"kind is {found}, must be {kind}"))
    else:
        return SIDE_TABLES[str(found)]
    return None


def _good_columns(raw: RawTable, spec: SideTable, faults: list[Fault]) -> bool:
    before = len(faults)
    known = {column.name: column for column in spec.columns}
    names = [column.name for column in raw.columns]
    for column in spec.columns:
        if column.name not in names and not column.optional:
            what = f"lacks column '{column.name}' ({column.help})"
            faults.append(Fault(raw.path, raw.header.line(("datatype",)), what))
    for found in raw.columns:
        what = _column_fault(found, known.get(found.name), list(known))
        if what:
            faults.append(Fault(raw.path, found.line, what))
    return bool(raw.columns) and len(faults) == before


def _column_fault(found: RawColumn, wanted: SideColumn | None, known: list[str]) -> str:
    if wanted is None:
        return f"unknown column '{found.name}'; {nearest(found.name, known)}"
    if not found.numeric:
        return f"datatype of column '{found.name}' is {found.datatype}, must be float64"
    if _factor(found.unit, wanted.unit) is None:
        given = f"'{found.unit}'" if found.unit else "missing"
        must = f"convertible to {wanted.unit}" if wanted.unit else "none"
        return f"unit of column '{found.name}' is {given}, must be {must}"
    return ""


def _factor(text: str, wanted: str) -> float | None:
    """Return one unit of a column in the unit wanted; None where it does not convert."""
    if not wanted:
        return None if text else 1.0
    try:
        return float(units.Unit(text).to(wanted))
    except (ValueError, TypeError, units.UnitConversionError):
        return None


def _values(rows: Rows, spec: SideTable) -> dict[str, Array]:
    columns = {}
    for column in spec.columns:
        if not rows.has(column.name):
            continue
        raw = rows.raw.column(column.name)
        factor = _factor(raw.unit if raw else "", column.unit) or 1.0
        lo, hi = column.minimum / factor, column.maximum / factor
        columns[column.name] = factor * rows.between(column.name, lo, hi, closed=True)
    if spec.increasing:
        x = columns[spec.increasing]
        bad = np.concatenate([[False], ~(np.diff(x) > 0.0)])
        rows.fault_where(bad, spec.increasing, "greater than in the row before")
    if spec.ordered:
        rows.ordered(*spec.ordered)
    return columns


def side_template(kind: str) -> str:
    """Return a commented starter file of a kind, valid as it is.

    Parameters
    ----------
    kind : str
        A key of `SIDE_TABLES`.
    """
    spec = SIDE_TABLES[kind]
    lines = [
        "%ECSV 1.0",
        "---",
        f"# {spec.description}",
        "# All numbers are examples.",
        "datatype:",
    ]
    shown = [column for column in spec.columns if not column.optional]
    for column in shown:
        unit = f"unit: {column.unit}, " if column.unit else ""
        lines.append(f"- {{name: {column.name}, {unit}datatype: float64}}   # {column.help}")
    lines += [f"# Optional column: {c.name} ({c.help})" for c in spec.columns if c.optional]
    lines += ["meta:", f"  kind: {kind}", "  source: Table 1 of ...", "schema: astropy-2.0"]
    body = [" ".join(column.name for column in shown)]
    n_rows = min(len(column.examples) for column in shown)
    body += [" ".join(f"{column.examples[i]:g}" for column in shown) for i in range(n_rows)]
    return "\n".join([*(f"# {line}" for line in lines), *body, ""])
