"""Constraint files: read, validated completely, and turned into `DataSet`s.

A constraint file is ECSV (astropy's Enhanced CSV) with the measurements of one quantity: numbers
with their units in the columns, conventions in ``meta``. The `spec` of its quantity says what a
file must hold. Everything wrong with a file is found at once and reported
with its line; what passes is trusted from here on.
"""

from __future__ import annotations

import os
import re
from collections.abc import Iterable
from pathlib import Path
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fogline.absorber_files import process_arrays
from fogline.cosmology import Cosmology
from fogline.covariance_files import read_covariance
from fogline.datasets import DataSet
from fogline.ecsv_lines import RawTable, read_table, split_ecsv
from fogline.faults import Fault, InputError
from fogline.file_columns import are_counts, check_columns
from fogline.file_meta import check_meta, find_spec
from fogline.file_rows import Rows, check_rows
from fogline.file_units import check_units
from fogline.linked_files import linked_path
from fogline.quantities.spec import FileSpec, ValueColumn
from fogline.text_files import read_text

_STEM: Final = re.compile(r"[A-Za-z0-9_-]+")

PathLike = str | os.PathLike[str]


def read_constraint_file(path: PathLike) -> DataSet:
    """Return the data set that one constraint file holds.

    Parameters
    ----------
    path : path-like
        An ECSV file.

    Returns
    -------
    DataSet
        In the file's own units and convention.

    Raises
    ------
    InputError
        With every fault of the file.
    """
    path = os.fspath(path)
    faults: list[Fault] = []
    try:
        text = read_text(path)
    except InputError as error:
        raise InputError([*error.faults, *_stem_faults(path)]) from None
    faults.extend(_stem_faults(path))
    raw = split_ecsv(path, text, faults)
    dataset = None if raw is None else _validate(raw, faults)
    if faults:
        raise InputError(faults)
    assert dataset is not None  # whatever keeps a data set from being made is a fault
    return dataset


def read_constraint_files(paths: Iterable[PathLike]) -> list[DataSet]:
    """Return the data sets of several files, which together make one analysis.

    Parameters
    ----------
    paths : iterable of path-like
        ECSV files.

    Returns
    -------
    list of DataSet
        In the order of `paths`.

    Raises
    ------
    InputError
        With every fault of all files, and where two of them have the same stem.
    """
    names = [os.fspath(path) for path in paths]
    datasets: list[DataSet] = []
    faults = duplicate_stems(names)
    for path in names:
        try:
            datasets.append(read_constraint_file(path))
        except InputError as error:
            faults.extend(error.faults)
    if faults:
        raise InputError(faults)
    return datasets


def duplicate_stems(paths: Iterable[str]) -> list[Fault]:
    """Return a fault for each file whose stem another file before it has.

    Parameters
    ----------
    paths : iterable of str
        Files of one analysis.

    Returns
    -------
    list of Fault
    """
    seen: dict[str, str] = {}
    faults = []
    for path in paths:
        stem = Path(path).stem
        if stem in seen:
            what = f"has the same name '{stem}' as {seen[stem]}; data sets need names of their own"
            faults.append(Fault(path, 1, what))
        seen.setdefault(stem, path)
    return faults


def _stem_faults(path: str) -> list[Fault]:
    stem = Path(path).stem
    if _STEM.fullmatch(stem):
        return []
    what = f"file is named '{stem}', must be letters, digits, '_' and '-' (it names outputs)"
    return [Fault(path, 1, what)]


def _validate(raw: RawTable, faults: list[Fault]) -> DataSet | None:
    spec = find_spec(raw, faults)
    if spec is None:
        return None
    counts = spec.counts and are_counts(raw)
    meta = check_meta(raw, spec, counts, faults)
    if not raw.columns or not check_columns(raw, spec, faults):
        return None
    value = _value_column(spec, meta)
    unit = check_units(raw, value, faults)
    table = read_table(raw, faults)
    if table is None:
        return None
    rows = Rows(raw, table, faults)
    arrays = check_rows(rows, spec, value, counts, meta)
    if spec.absorbers:
        made = {} if faults else process_arrays(raw, rows, arrays, meta, faults)
    else:
        covariance, linked = _covariance(raw, meta, unit, arrays, faults)
        made = {**arrays, "covariance": covariance, "linked": linked}
    if faults:
        return None
    return DataSet(
        name=Path(raw.path).stem,
        path=raw.path,
        quantity=spec.quantity,
        meta=meta,
        unit=unit,
        counts=counts,
        cosmology=_cosmology(raw.meta.get("cosmology")),
        logarithmic=value is not None and value.logarithmic and not (counts or spec.absorbers),
        **made,
    )


def _covariance(
    raw: RawTable, meta: dict[str, Any], unit: str, arrays: dict[str, Any], faults: list[Fault]
) -> tuple[NDArray[np.float64] | None, tuple[str, ...]]:
    """Return the covariance that a file names, and the files that it came from."""
    if meta.get("covariance") is None or faults:
        return None, ()
    line = raw.meta_line("covariance")
    if (arrays["limit"] != 0).any():
        what = "a limit stands in a file with a covariance; put limits into a file of their own"
        faults.append(Fault(raw.path, arrays["lines"][int((arrays["limit"] != 0).argmax())], what))
    if not np.array_equal(arrays["err_lo"], arrays["err_hi"]):
        what = "covariance stands beside errors that differ between the sides; must be equal"
        faults.append(Fault(raw.path, line, what))
    path = linked_path(raw.path, meta["covariance"])
    if not Path(path).is_file():
        what = f"covariance names {meta['covariance']!r}, but there is no file {path}"
        faults.append(Fault(raw.path, line, what))
    if faults:
        return None, ()
    return read_covariance(path, unit, arrays, faults), (path,)


def _value_column(spec: FileSpec, meta: dict[str, Any]) -> ValueColumn | None:
    return spec.values.get(str(meta.get(spec.form_key, "")) if spec.form_key else "")


def _cosmology(block: dict[str, Any] | None) -> Cosmology | None:
    if block is None:
        return None
    dark = block.get("Ode0")
    return Cosmology(float(block["H0"]), float(block["Om0"]), None if dark is None else float(dark))
