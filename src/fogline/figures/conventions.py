"""Whether a data set and a model curve speak of the same thing.

Each function names what sets a data set apart from the curve, in a few words for a note, or
returns an empty string. Such data are shown with their own prediction beside them.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Final

from fogline.atomic import log_nhi_at_tau
from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.quantities import Setting

SAME_COLUMN: Final = 0.02
"""Column limits closer than this [dex] are the same: 17.2 is log N at tau = 1 to two digits."""


def column_limits(data: DataSet) -> tuple[float, float]:
    """Return the column range that a file's meta states; infinite where it is open above."""
    lo = data.meta.get("log_nhi_min")
    if lo is None:
        lo = log_nhi_at_tau(float(data.meta["tau_min"]))
    hi = data.meta.get("log_nhi_max")
    return float(lo), float("inf") if hi is None else float(hi)


def same_columns(data: DataSet, setting: Setting, lo: float, hi: float) -> bool:
    """Return whether a data set counts the columns from `lo` to `hi` (infinite: last pivot)."""
    found = _clipped(column_limits(data), setting)
    wanted = _clipped((lo, hi), setting)
    return all(abs(a - b) < SAME_COLUMN for a, b in zip(found, wanted, strict=True))


def _clipped(limits: tuple[float, float], setting: Setting) -> tuple[float, float]:
    first, last = setting.column_range
    return max(limits[0], first), min(limits[1], last)


def other_columns(data: DataSet, setting: Setting, lo: float, hi: float) -> str:
    """Return the column range of a data set where it is not that of the curve."""
    if same_columns(data, setting, lo, hi):
        return ""
    first, last = column_limits(data)
    if last == float("inf"):
        return rf"$\log N \geq {first:.4g}$"
    return rf"$\log N = {first:.4g}$–${last:.4g}$"


def other_cosmology(data: DataSet, setting: Setting) -> str:
    """Return the cosmology of a data set where it is not that of the results."""
    ours, theirs = setting.cosmology, data.cosmology
    if theirs is None or _numbers(theirs) == _numbers(ours):
        return ""
    if theirs.H0 != ours.H0:
        return f"$H_0 = {theirs.H0:g}$"
    return rf"$\Omega_\mathrm{{m}} = {theirs.Om0:g}$"


def _numbers(cosmology: Cosmology) -> tuple[float, float, float]:
    dark = 1.0 - cosmology.Om0 if cosmology.Ode0 is None else cosmology.Ode0
    return cosmology.H0, cosmology.Om0, dark


def joined(parts: Iterable[str]) -> str:
    """Return differences as one text; empty where there are none."""
    return ", ".join(part for part in parts if part)
