"""The column densities that a data set needs f at, compared with the pivots that a model has."""

from __future__ import annotations

from collections.abc import Sequence

from fogline.atomic import log_nhi_at_tau
from fogline.datasets import DataSet
from fogline.ecsv_lines import split_ecsv
from fogline.faults import Fault, InputError
from fogline.text_files import read_text

ColumnRange = tuple[float | None, float | None]

SCATTER = 2.0
"""Errors below the lowest measured column down to which a list needs the model."""

# Limits such as log N(tau = 2) carry rounding; a pivot given to that precision is meant.
_ROUNDING = 1e-9


def column_ranges(dataset: DataSet) -> ColumnRange:
    """Return the lowest and highest column that a data set needs.

    Parameters
    ----------
    dataset : DataSet
        Measurements of any quantity.

    Returns
    -------
    tuple of float or None [dex of cm^-2]
        None where it goes down or up to the end of the model.
    """
    if dataset.quantity == "column_distribution":
        return float(dataset.log_nhi_lo.min()), float(dataset.log_nhi_hi.max())
    meta = dataset.meta
    low, high = meta.get("log_nhi_min"), meta.get("log_nhi_max")
    if meta.get("tau_min") is not None:
        low = log_nhi_at_tau(float(meta["tau_min"]))
    if dataset.quantity == "absorber_list" and low is not None:
        # Weaker absorbers that errors scatter into the range are part of the prediction.
        low -= SCATTER * float(
            max(dataset.extras["errors_lo"].max(), dataset.extras["errors_hi"].max())
        )
    return None if low is None else float(low), None if high is None else float(high)


def check_column_range(dataset: DataSet, pivots: Sequence[float]) -> list[Fault]:
    """Return what a data set needs beyond the pivots of a model, where f is undefined.

    Parameters
    ----------
    dataset : DataSet
        Measurements of any quantity.
    pivots : sequence of float [dex of cm^-2]
        Increasing.

    Returns
    -------
    list of Fault
        At most one, which names both ranges.
    """
    low, high = column_ranges(dataset)
    bottom, top = pivots[0] - _ROUNDING, pivots[-1] + _ROUNDING
    too_low = low is not None and not bottom <= low < pivots[-1]
    too_high = high is not None and not pivots[0] < high <= top
    if not too_low and not too_high:
        return []
    what = (
        f"needs columns log N_HI = {range_text(low, high)}, beyond the pivots of the model, "
        f"{pivots[0]:g} to {pivots[-1]:g}"
    )
    return [Fault(dataset.path, _line(dataset, too_low, pivots), what)]


def range_text(low: float | None, high: float | None) -> str:
    """Return a column range in words, e.g. ``17.5 to the top``."""
    lower = "the bottom" if low is None else f"{low:.4g}"
    return f"{lower} to {'the top' if high is None else f'{high:.4g}'}"


def _line(dataset: DataSet, too_low: bool, pivots: Sequence[float]) -> int:
    """Return the line that states the range: looked up again, faults being rare."""
    if dataset.quantity == "column_distribution":
        beyond = (dataset.log_nhi_lo < pivots[0] - _ROUNDING) | (
            dataset.log_nhi_hi > pivots[-1] + _ROUNDING
        )
        return dataset.lines[int(beyond.argmax())]
    keys = ("tau_min", "log_nhi_min") if too_low else ("log_nhi_max",)
    try:
        raw = split_ecsv(dataset.path, read_text(dataset.path), [])
    except InputError:
        return 1
    return 1 if raw is None else max(raw.meta_line(key) for key in keys)
