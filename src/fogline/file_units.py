"""Units of a constraint file's columns, checked with `astropy.units`.

The unit ``littleh`` (lengths in Mpc/h) is enabled by context only, never for the whole process.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

from astropy import units
from astropy.cosmology import units as cosmology_units

from fogline.ecsv_lines import RawColumn, RawTable
from fogline.faults import Fault
from fogline.file_columns import WAVELENGTHS
from fogline.quantities.spec import ValueColumn

_MEASURED: Final = ("value", "log_f", "log_nhi", "err", "err_lo", "err_hi")
_PLAIN_UNITS: Final[Mapping[str, tuple[str, ...]]] = {
    "z": ("redshift",),
    "z_lo": ("redshift",),
    "z_hi": ("redshift",),
    "log_nhi_lo": ("dex", "dex(1 / cm2)", "dex(cm-2)"),
    "log_nhi_hi": ("dex", "dex(1 / cm2)", "dex(cm-2)"),
}
"""Units that may stand on columns without one, which they leave unchanged."""


def check_units(raw: RawTable, value: ValueColumn | None, faults: list[Fault]) -> str:
    """Return the unit of the measured column, appending what is wrong to `faults`.

    Parameters
    ----------
    raw : RawTable
        The file.
    value : ValueColumn or None
        The measured column's specification; None where the file does not say its form.
    faults : list of Fault
        Is appended to.

    Returns
    -------
    str
        As the file writes it; empty where the numbers are dimensionless or in dex.
    """
    for column in raw.columns:
        if column.name in _MEASURED:
            if value is not None:
                _check_measured(raw, column, value, faults)
        elif column.name in WAVELENGTHS:
            _check_wavelength(raw, column, faults)
        elif column.name != "label":
            _check_plain(raw, column, faults)
    if value is None:
        return ""
    main = raw.column(value.name)
    return main.unit if main is not None and value.units else ""


def _check_plain(raw: RawTable, column: RawColumn, faults: list[Fault]) -> None:
    allowed = _PLAIN_UNITS.get(column.name, ())
    unit = _parse(raw, column, faults)
    if unit is not None and not _is_one_of(unit, allowed):
        also = f" (or {', '.join(allowed)})" if allowed else ""
        what = f"unit of column '{column.name}' is '{column.unit}', must be none{also}"
        faults.append(Fault(raw.path, column.line, what))


def _check_wavelength(raw: RawTable, column: RawColumn, faults: list[Fault]) -> None:
    unit = _parse(raw, column, faults)
    if unit is not None and not _converts(unit, units.Angstrom):
        found = f"is '{column.unit}'" if column.unit else "is missing"
        what = f"unit of column '{column.name}' {found}, must be convertible to Angstrom"
        faults.append(Fault(raw.path, column.line, what))


def in_angstrom(raw: RawTable, name: str) -> float:
    """Return one unit of a wavelength column in Angstrom; 1 where `check_units` found a fault."""
    column = raw.column(name)
    assert column is not None
    try:
        unit = _unit(column.unit)
    except (ValueError, TypeError):
        return 1.0
    return float(unit.to(units.Angstrom)) if _converts(unit, units.Angstrom) else 1.0


def _check_measured(
    raw: RawTable, column: RawColumn, value: ValueColumn, faults: list[Fault]
) -> None:
    unit = _parse(raw, column, faults)
    if unit is None:
        return
    main = raw.column(value.name)
    if not value.units:
        allowed = ("dex", "dex(cm2)") if value.logarithmic else ()
        good = _is_one_of(unit, allowed)
        must = "none" + (f" (or {', '.join(allowed)})" if allowed else "")
    elif column.name == value.name or main is None:
        good = any(_converts(unit, _unit(target)) for target in value.units)
        must = f"convertible to {' or '.join(value.units)}"
    else:
        good, must = column.unit == main.unit, f"'{main.unit}' like that of '{value.name}'"
    if not good:
        found = f"is '{column.unit}'" if column.unit else "is missing"
        what = f"unit of column '{column.name}' {found}, must be {must}"
        faults.append(Fault(raw.path, column.line, what))


def _unit(text: str) -> units.UnitBase:
    with units.add_enabled_units(cosmology_units):
        return units.Unit(text)


def _parse(raw: RawTable, column: RawColumn, faults: list[Fault]) -> units.UnitBase | None:
    try:
        return _unit(column.unit)
    except (ValueError, TypeError) as error:
        reason = " ".join(str(error).split()).split(" If this is meant")[0][:160]
        what = f"unit of column '{column.name}' is '{column.unit}', not a known unit: {reason}"
        faults.append(Fault(raw.path, column.line, what))
        return None


def _is_one_of(unit: units.UnitBase, allowed: tuple[str, ...]) -> bool:
    if unit == units.dimensionless_unscaled:
        return True
    return any(unit == _unit(target) for target in allowed)


def _converts(unit: units.UnitBase, target: units.UnitBase) -> bool:
    # A unit such as dex(Mpc) converts to Mpc for astropy, but holds logarithms.
    return isinstance(unit, units.UnitBase) and bool(unit.is_equivalent(target))
