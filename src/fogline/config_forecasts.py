"""Checks on the candidates of a config that need no knowledge of their quantity.

Light, as all that the workflow imports at every start; `fogline.trust.candidates` checks the rest.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from typing import Any, Final

from fogline.config_schema import PlacedFault
from fogline.yaml_lines import Place, dotted

_NAME: Final = re.compile(r"[A-Za-z0-9_-]+")

ERRORS: Final = ("error", "relative_error", "path")
"""Keys of a row of which exactly one says how well it will be measured."""

FREE_KEYS: Final = ("error", "relative_error", "label")
"""Keys that one row of a candidate may have and another not."""


def forecast_faults(forecasts: Mapping[str, Any]) -> Iterator[PlacedFault]:
    """Give what is wrong with names and rows of candidates.

    Parameters
    ----------
    forecasts : mapping
        The config's block, valid by the schema; a candidate may be None (left out).

    Yields
    ------
    tuple
        Place within the blocks, and fault.
    """
    for name, candidate in forecasts.items():
        place: Place = ("forecasts", name)
        if not _NAME.fullmatch(str(name)):
            yield place, f"candidate is named '{name}', must be letters, digits, '_' and '-'"
        if candidate is None:
            continue
        rows = candidate["rows"]
        for i, row in enumerate(rows):
            for what in _row_faults(row, rows[0], dotted((*place, "rows", 0))):
                yield (*place, "rows", i), f"{dotted((*place, 'rows', i))} {what}"


def _row_faults(row: Mapping[str, Any], first: Mapping[str, Any], where: str) -> Iterator[str]:
    stated = [key for key in ERRORS if key in row]
    if not stated:
        yield "lacks 'error' or 'relative_error' (or 'path', for counts)"
    elif len(stated) > 1:
        yield f"has {' and '.join(map(repr, stated))}; allowed is one of them"
    ends = {key for key in ("z_lo", "z_hi") if key in row}
    if ("z" in row) == (len(ends) == 2) or (ends and len(ends) < 2):
        yield "must have either 'z' or both 'z_lo' and 'z_hi'"
    keys = [[key for key in one if key not in FREE_KEYS] for one in (row, first)]
    if set(keys[0]) != set(keys[1]):
        found, wanted = (", ".join(sorted(one)) or "none" for one in keys)
        yield f"has the keys {found}, must have those of {where}: {wanted}"
