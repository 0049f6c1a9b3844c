"""Validation of which columns a constraint file has, against its quantity's `FileSpec`."""

from __future__ import annotations

from typing import Final

from fogline.ecsv_lines import RawTable
from fogline.faults import Fault, nearest
from fogline.quantities.spec import FileSpec

_TEXT_COLUMNS: Final = ("limit", "label")

WAVELENGTHS: Final = ("wavelength", "wavelength_lo", "wavelength_hi")
"""Columns of rest wavelengths."""


def are_counts(raw: RawTable) -> bool:
    """Return whether the rows are counts over a path rather than measured values."""
    return raw.column("count") is not None or raw.column("path") is not None


def check_columns(raw: RawTable, spec: FileSpec, faults: list[Fault]) -> bool:
    """Check which columns a file has and of which type.

    Parameters
    ----------
    raw : RawTable
        The file.
    spec : FileSpec
        The quantity's specification.
    faults : list of Fault
        Is appended to.

    Returns
    -------
    bool
        Whether the rows can be checked.
    """
    before = len(faults)
    counts = spec.counts and are_counts(raw)
    names = {column.name for column in raw.columns}
    value_name = next(iter(spec.values.values())).name
    for what in _missing_columns(names, spec, value_name, counts):
        faults.append(Fault(raw.path, raw.header.line(("datatype",)), what))
    known = _known_columns(spec, value_name)
    for column in raw.columns:
        if column.name not in known:
            what = f"unknown column '{column.name}'; {nearest(column.name, known)}"
        elif what := _clash(column.name, names, value_name, counts):
            pass
        elif column.name not in _TEXT_COLUMNS and not column.numeric:
            what = f"datatype of column '{column.name}' is {column.datatype}, must be float64"
        elif column.name == "limit" and column.datatype != "string":
            what = f"datatype of column 'limit' is {column.datatype}, must be string"
        else:
            continue
        faults.append(Fault(raw.path, column.line, what))
    return len(faults) == before


def _known_columns(spec: FileSpec, value_name: str) -> list[str]:
    known = ["z", "z_lo", "z_hi", value_name, "err", "err_lo", "err_hi", *_TEXT_COLUMNS]
    known += ["count", "path"] if spec.counts else []
    known += WAVELENGTHS if spec.wavelengths else []
    if spec.absorbers:  # one redshift each
        known = [name for name in known if name not in ("z_lo", "z_hi")] + ["sightline"]
    return known + (["log_nhi_lo", "log_nhi_hi"] if spec.column_bins else [])


def _missing_columns(names: set[str], spec: FileSpec, value_name: str, counts: bool) -> list[str]:
    pairs = [("z_lo", "z_hi")] if names & {"z_lo", "z_hi"} else []
    pairs += [("err_lo", "err_hi")] if names & {"err_lo", "err_hi"} else []
    pairs += [("count", "path")] if counts else []
    pairs += [("log_nhi_lo", "log_nhi_hi")] if spec.column_bins else []
    pairs += [WAVELENGTHS[1:]] if names & set(WAVELENGTHS[1:]) else []
    missing = [name for pair in pairs for name in pair if name not in names]
    faults = [f"lacks column '{name}', which {spec.quantity} needs here" for name in missing]
    if not names & {"z", "z_lo", "z_hi"}:
        faults.append("lacks column 'z' (or 'z_lo' and 'z_hi')")
    if spec.wavelengths and not names & set(WAVELENGTHS):
        faults.append("lacks column 'wavelength' (or 'wavelength_lo' and 'wavelength_hi')")
    if not counts and value_name not in names:
        also = " (or 'count' and 'path')" if spec.counts else ""
        faults.append(f"lacks column '{value_name}'{also}")
    if not counts and not names & {"err", "err_lo", "err_hi", "limit"}:
        faults.append("lacks column 'err' (or 'err_lo' and 'err_hi')")
    return faults


def _clash(name: str, names: set[str], value_name: str, counts: bool) -> str:
    if name == "z" and names & {"z_lo", "z_hi"}:
        return "column 'z' stands beside 'z_lo' and 'z_hi'; allowed is one form only"
    if name == "wavelength" and names & set(WAVELENGTHS[1:]):
        return "column 'wavelength' stands beside 'wavelength_lo' and 'wavelength_hi'"
    if name == "err" and names & {"err_lo", "err_hi"}:
        return "column 'err' stands beside 'err_lo' and 'err_hi'; allowed is one form only"
    if counts and name in (value_name, "err", "err_lo", "err_hi", "limit"):
        return f"column '{name}' stands beside 'count' and 'path', whose errors are Poisson"
    return ""
