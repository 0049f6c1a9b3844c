"""A list of absorbers, its path and completeness, made one `DataSet`."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fogline.absorbers.errors import SMALLEST, representative
from fogline.absorbers.path import from_sensitivity, from_sightlines, truncated
from fogline.absorbers.reduction import reduce_list
from fogline.atomic import log_nhi_at_tau
from fogline.datasets import EXPOSURE, INTENSITY, SHOWN
from fogline.ecsv_lines import RawTable
from fogline.faults import Fault, InputError
from fogline.file_rows import Rows
from fogline.linked_files import linked_path
from fogline.side_tables import read_side_table, side_kind

Array = NDArray[np.float64]

BIN: Final = 0.2
"""Width of the bins that are shown [dex], at least."""

MOST_BINS: Final = 12

BOUND_ERROR: Final = 0.05
"""Error of a lower bound that states none [dex]."""


@dataclass(frozen=True)
class Listed:
    """The rows of a list as the file has them.

    Parameters
    ----------
    z, log_nhi, lo, hi : ndarray, shape (n_absorbers,)
    bound : ndarray of bool, shape (n_absorbers,)
        Which are lower bounds.
    """

    z: Array
    log_nhi: Array
    lo: Array
    hi: Array
    bound: NDArray[np.bool_]

    def where(self, kept: NDArray[np.bool_]) -> Listed:
        """Return the rows where `kept` is true."""
        return Listed(
            self.z[kept], self.log_nhi[kept], self.lo[kept], self.hi[kept], self.bound[kept]
        )


def process_arrays(
    raw: RawTable, rows: Rows, arrays: dict[str, Any], meta: dict[str, Any], faults: list[Fault]
) -> dict[str, Any]:
    """Return the arrays of a list's `DataSet`, appending what is wrong to `faults`.

    Parameters
    ----------
    raw : RawTable
    rows : Rows
        The list's rows.
    arrays : dict
        What `fogline.file_rows.check_rows` made of them.
    meta : dict
        The list's meta.
    faults : list of Fault
        Is appended to.
    """
    listed = _listed(rows, arrays, meta)
    linked, path = _linked(raw, meta, "survey_path", ("sightlines", "sensitivity"), faults)
    more, complete = _linked(raw, meta, "completeness", ("completeness",), faults)
    if faults:
        return {}
    if meta.get("ends_at_tau") is not None:
        listed, path = _ended(raw, rows, listed, path, meta, faults)
    _check_inside(rows, listed, path, faults if meta.get("ends_at_tau") is None else [])
    if faults:
        return {}
    if "g" in path:
        path_z, path_weight = from_sensitivity(path["z"], path["g"])
        span = float(path["z"][0]), float(path["z"][-1])
    else:
        path_z, path_weight = from_sightlines(path["z_start"], path["z_end"])
        span = float(path["z_start"].min()), float(path["z_end"].max())
    lo, hi = representative(*_errors_of(listed))
    extras = {"path_z": path_z, "path_weight": path_weight, "errors_lo": lo, "errors_hi": hi}
    extras["n_absorbers"] = np.array(float(len(listed.z)))
    if complete:
        extras |= {
            "completeness": complete["completeness"],
            "completeness_log_nhi": complete["log_nhi"],
        }
    arrays = _rows_of(listed, meta, span)
    return arrays | {"extras": extras, "linked": (*linked, *more)}


def _listed(rows: Rows, arrays: dict[str, Any], meta: dict[str, Any]) -> Listed:
    log_nhi, bound = arrays["observed"], arrays["limit"] != 0
    rows.fault_where(arrays["limit"] > 0, "limit", 'lower or empty ("") in a list of absorbers')
    least, most = meta.get("log_nhi_min", -np.inf), meta.get("log_nhi_max") or np.inf
    outside = ~bound & ((log_nhi < least) | (log_nhi > most)) & np.isfinite(log_nhi)
    must = f"within the range that the list holds, {least:g} to {most:g}"
    rows.fault_where(outside, "log_nhi", must)
    lo, hi = (
        np.maximum(np.where(np.isnan(e), BOUND_ERROR, e), SMALLEST)
        for e in (arrays["err_lo"], arrays["err_hi"])
    )
    return Listed(arrays["z_lo"], log_nhi, lo, hi, bound)


def _linked(
    raw: RawTable, meta: dict[str, Any], key: str, kinds: tuple[str, ...], faults: list[Fault]
) -> tuple[tuple[str, ...], dict[str, Array]]:
    """Return the file that a meta key names, and its columns."""
    if meta.get(key) is None:
        return (), {}
    path = linked_path(raw.path, meta[key])
    line = raw.meta_line(key)
    if not Path(path).is_file():
        faults.append(Fault(raw.path, line, f"{key} names {meta[key]!r}, but there is no {path}"))
        return (), {}
    kind = side_kind(path)
    if kind not in kinds:
        must = " or ".join(kinds)
        what = f"{key} names a file of kind '{kind}', must be {must} (meta key 'kind' there)"
        faults.append(Fault(raw.path, line, what))
        return (), {}
    try:
        return (path,), read_side_table(path, kind)
    except InputError as error:
        faults.extend(error.faults)
        return (path,), {}


def _ended(
    raw: RawTable,
    rows: Rows,
    listed: Listed,
    path: dict[str, Array],
    meta: dict[str, Any],
    faults: list[Fault],
) -> tuple[Listed, dict[str, Array]]:
    """Return list and path with every sightline cut at its first thick absorber."""
    line = raw.meta_line("ends_at_tau")
    if "sightline" not in path or not rows.has("sightline"):
        what = "ends_at_tau needs a column 'sightline' in the list and in its path (sightlines)"
        faults.append(Fault(raw.path, line, what))
        return listed, path
    name = rows.numbers("sightline")
    known = np.isin(name, path["sightline"])
    rows.fault_where(~known, "sightline", "one of the sightlines of the survey path")
    if len(np.unique(path["sightline"])) < len(path["sightline"]):
        faults.append(Fault(raw.path, line, "a sightline stands twice in the survey path"))
    if not known.all() or faults:
        return listed, path
    thick = listed.log_nhi >= float(log_nhi_at_tau(float(meta["ends_at_tau"])))
    start = truncated(path["z_start"], path["sightline"], listed.z[thick], name[thick])
    order = np.argsort(path["sightline"])
    own = order[np.searchsorted(path["sightline"], name, sorter=order)]
    kept = (listed.z >= start[own]) & (listed.z <= path["z_end"][own])
    return listed.where(kept), {**path, "z_start": start}


def _check_inside(rows: Rows, listed: Listed, path: dict[str, Array], faults: list[Fault]) -> None:
    if not path or len(listed.z) != len(rows.lines):
        return
    lo, hi = (path["z"][0], path["z"][-1]) if "g" in path else (
        path["z_start"].min(), path["z_end"].max()
    )  # fmt: skip
    outside = (listed.z < lo) | (listed.z > hi)
    rows.fault_where(outside, "z", f"on the survey path, {lo:g} to {hi:g}")


def _errors_of(listed: Listed) -> tuple[Array, Array]:
    measured = ~listed.bound if (~listed.bound).any() else np.ones(len(listed.z), dtype=bool)
    return listed.lo[measured], listed.hi[measured]


def _rows_of(listed: Listed, meta: dict[str, Any], span: tuple[float, float]) -> dict[str, Any]:
    edges = _bin_edges(listed, meta)
    counts = np.histogram(np.clip(listed.log_nhi, edges[0], edges[-1]), edges)[0]
    return list_rows(listed, edges, counts, span)


def list_rows(
    listed: Listed, edges: Array, counts: NDArray[np.int64], span: tuple[float, float]
) -> dict[str, Any]:
    """Return the rows of a data set: cells, expected number, bins that are shown.

    Parameters
    ----------
    listed : Listed
        Any number of absorbers, none included.
    edges : ndarray, shape (n_bins + 1,) [dex of cm^-2]
        Of the bins that are shown.
    counts : ndarray of int, shape (n_bins,)
        Absorbers in them.
    span : (float, float)
        Ends of the path.

    Returns
    -------
    dict
        Keyword arguments of `fogline.datasets.DataSet` that hold one entry a row.
    """
    parts = [(0, listed.where(~listed.bound)), (-1, listed.where(listed.bound))]
    cells = [
        (sign, reduce_list(part.log_nhi, part.z, part.lo, part.hi))
        for sign, part in parts
        if len(part.z)
    ]
    n_cells = sum(len(cell.z) for _, cell in cells)
    nan = np.full(n_cells, np.nan)

    def column(name: str, exposure: float, shown: Array) -> Array:
        values = [getattr(cell, name) for _, cell in cells]
        return np.concatenate([*values, [exposure], shown])

    n_bins = len(counts)
    none = np.full(n_bins, np.nan)
    log_nhi = column("log_nhi", np.nan, none)
    limit = [np.full(len(cell.z), sign, dtype=np.int64) for sign, cell in cells]
    return {
        "z_lo": column("z", span[0], np.full(n_bins, span[0])),
        "z_hi": column("z", span[1], np.full(n_bins, span[1])),
        "observed": column("number", 0.0, counts.astype(float)),
        "err_lo": column("lo", np.nan, none),
        "err_hi": column("hi", np.nan, none),
        "limit": np.concatenate([*limit, np.zeros(1 + n_bins, dtype=np.int64)]),
        "log_nhi_lo": np.concatenate([log_nhi[:n_cells], [np.nan], edges[:-1]]),
        "log_nhi_hi": np.concatenate([log_nhi[:n_cells], [np.nan], edges[1:]]),
        "search_path": np.concatenate([nan, [np.nan], none]),
        "labels": ("",) * (n_cells + 1 + n_bins),
        "lines": (1,) * (n_cells + 1 + n_bins),
        "role": np.concatenate(
            [np.full(n_cells, INTENSITY), [EXPOSURE], np.full(n_bins, SHOWN)]
        ).astype(np.int64),
    }


def _bin_edges(listed: Listed, meta: dict[str, Any]) -> Array:
    least = float(meta["log_nhi_min"])
    most = float(meta.get("log_nhi_max") or max(listed.log_nhi.max(), least + BIN))
    n_bins = int(np.clip(np.floor((most - least) / BIN + 1e-9), 1, MOST_BINS))
    return np.linspace(least, most, n_bins + 1)
