"""The keys of a ``cosmology`` block, in a constraint file or a config, and their sane ranges.

Light on purpose: the config imports it, and nothing here pulls in numpy or astropy.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Any, Final

from fogline.faults import nearest

COSMOLOGY_RANGES: Final[Mapping[str, tuple[float, float]]] = {
    "H0": (10.0, 200.0),
    "Om0": (0.0, 2.0),
    "Ode0": (-1.0, 2.0),
}
"""Inclusive range of each key; H0 in km/s/Mpc (a dimensionless h is caught)."""

_REQUIRED: Final = ("H0", "Om0")
_HIGHEST_REDSHIFT: Final = 20.0


def cosmology_faults(block: Any) -> Iterator[tuple[str, str]]:
    """Give what is wrong with a ``cosmology`` block.

    Parameters
    ----------
    block : Any
        What stands under ``cosmology``.

    Yields
    ------
    tuple of str
        The key (empty for the block itself) and the fault.
    """
    if not isinstance(block, Mapping):
        yield "", f"cosmology is {block!r}, must be a mapping such as {{H0: 70.0, Om0: 0.3}}"
        return
    for key in block:
        if key not in COSMOLOGY_RANGES:
            yield key, f"unknown key 'cosmology.{key}'; {nearest(key, COSMOLOGY_RANGES)}"
    for key in _REQUIRED:
        if key not in block:
            yield "", f"cosmology lacks '{key}', must have H0 and Om0 (and may have Ode0)"
    faulty = [(key, what) for key, what in _out_of_range(block)]
    yield from faulty
    if not faulty and all(key in block for key in _REQUIRED):
        yield from _no_expansion(block)


def _out_of_range(block: Mapping[str, Any]) -> Iterator[tuple[str, str]]:
    for key, (low, high) in COSMOLOGY_RANGES.items():
        if key not in block or (key == "Ode0" and block[key] is None):
            continue
        found = block[key]
        if not is_number(found) or not low <= found <= high:
            what = f"cosmology.{key} is {found!r}, must be a number in [{low:g}, {high:g}]"
            yield key, what + text_number_hint(found)


def _no_expansion(block: Mapping[str, Any]) -> Iterator[tuple[str, str]]:
    matter = float(block["Om0"])
    dark = 1.0 - matter if block.get("Ode0") is None else float(block["Ode0"])
    for step in range(int(_HIGHEST_REDSHIFT) * 10 + 1):
        a = 1.0 + step / 10.0
        if matter * a**3 + (1.0 - matter - dark) * a**2 + dark <= 0.0:
            what = (
                f"cosmology with Om0 = {matter:g}, Ode0 = {dark:g} has no H(z) at z = {a - 1:.1f}"
            )
            yield "Ode0" if "Ode0" in block else "Om0", what
            return


def is_number(value: Any) -> bool:
    """Return whether a value read from YAML is a finite number (and no boolean)."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return False
    return abs(value) < 1.0e300 and math.isfinite(value)


def text_number_hint(value: Any) -> str:
    """Return a hint where YAML has read as text what was meant as a number, else nothing."""
    try:
        number = float(value) if isinstance(value, str) else math.nan
    except ValueError:
        number = math.nan
    if not math.isfinite(number):
        return ""
    # YAML 1.1 wants a dot and a signed exponent: 1e-3 is text, 1.0e-3 a number.
    return f"; '{value}' is text to YAML, write {float_text(number)} without quotes"


def float_text(number: float) -> str:
    """Return a float as YAML reads it back, e.g. ``1.0e-3``."""
    text = repr(float(number))
    if "e" not in text:
        return text
    mantissa, exponent = text.split("e")
    mantissa = mantissa if "." in mantissa else f"{mantissa}.0"
    return f"{mantissa}e{int(exponent):+d}"
