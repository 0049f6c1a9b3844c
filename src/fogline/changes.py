"""What moved since a previous results folder, and what was changed to move it."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any, Final

import numpy as np
from astropy.table import Table

from fogline.comparison import Value, headline_values
from fogline.tables import read_table

DEFINITION: Final = (
    "before, now: median and 68% band in the previous results folder and in this one. "
    "change_sigma: difference of the medians over half the present 68% width, how far the answer "
    "has moved in units of its error. It is no significance: most of the data are the same."
)

SETTINGS: Final = ("cosmology", "model", "nuisances", "sampler", "derive")
"""Settings that results depend on; those of checks and forecasts change none."""

Tables = Mapping[str, Table]


def read_previous(folder: str | Path, analysis: str, names: tuple[str, ...]) -> dict[str, Table]:
    """Return the derived tables of an analysis in a results folder; empty where it is not there.

    Parameters
    ----------
    folder : path-like
        Holds ``<analysis>/tables/<name>.ecsv``.
    analysis : str
    names : tuple of str
        Tables to read; those that an older version did not make are left out.
    """
    tables = Path(folder) / analysis / "tables"
    paths = {name: tables / f"{name}.ecsv" for name in names}
    return {name: read_table(path) for name, path in paths.items() if path.is_file()}


def changes(before: Mapping[str, Tables], now: Mapping[str, Tables]) -> Table:
    """Return the headline quantities of analyses before and now.

    Parameters
    ----------
    before, now : mapping of str to mapping of str to astropy.table.Table
        Derived tables by analysis and name; analyses that are not in both are left out.

    Returns
    -------
    astropy.table.Table
        ``analysis, quantity, z, before_median, before_lo68, before_hi68, median, lo68, hi68,
        change_sigma``; its meta ``changed`` says in words what was altered.
    """
    rows: list[tuple[Any, ...]] = []
    changed: list[str] = []
    for analysis in now:
        if not before.get(analysis):
            continue
        old = {(v.quantity, round(v.z, 6)): v for v in headline_values(before[analysis])}
        for value in headline_values(now[analysis]):
            then = old.get((value.quantity, round(value.z, 6)))
            if then is not None:
                rows.append(_row(analysis, then, value))
        changed += [f"{analysis}: {what}" for what in _altered(before[analysis], now[analysis])]
    numbers = ("z", *(f"before_{n}" for n in ("median", "lo68", "hi68")), "median", "lo68", "hi68")
    names = ("analysis", "quantity", *numbers, "change_sigma")
    table = Table(rows=rows, names=names, dtype=("U64", "U64", *[float] * (len(names) - 2)))
    table.meta["definition"] = DEFINITION
    table.meta["changed"] = changed or ["nothing: the same inputs and settings"]
    return table


def _row(analysis: str, then: Value, value: Value) -> tuple[Any, ...]:
    error = value.sigma if np.isfinite(value.sigma) else float("nan")
    before = (then.median, then.lo68, then.hi68)
    now = (value.median, value.lo68, value.hi68)
    change = (value.median - then.median) / error if error else float("nan")
    return (analysis, value.quantity, value.z, *before, *now, change)


def _altered(before: Tables, now: Tables) -> Iterator[str]:
    """Give what differs between the inputs and settings behind two sets of tables."""
    old, new = (next(iter(tables.values())).meta for tables in (before, now))
    files_then, files_now = dict(old.get("inputs", {})), dict(new.get("inputs", {}))
    for path in sorted(files_now.keys() - files_then.keys()):
        yield f"added {path}"
    for path in sorted(files_then.keys() - files_now.keys()):
        yield f"removed {path}"
    for path in sorted(files_now.keys() & files_then.keys()):
        if files_now[path] != files_then[path]:
            yield f"altered {path}"
    then, now_ = (json.loads(str(meta.get("config", "{}"))) for meta in (old, new))
    for block in SETTINGS:
        yield from _different(then.get(block), now_.get(block), block)
    if old.get("fogline_version") != new.get("fogline_version"):
        yield f"fogline {old.get('fogline_version')} became {new.get('fogline_version')}"


def _different(old: Any, new: Any, place: str) -> Iterator[str]:
    """Give the settings that differ, by their dotted place."""
    if isinstance(old, Mapping) and isinstance(new, Mapping):
        for key in sorted(old.keys() | new.keys()):
            if key != "datasets":
                yield from _different(
                    old.get(key), new.get(key), f"{place}.{key}" if place else key
                )
    elif old != new:
        yield f"{place}: {json.dumps(old)} became {json.dumps(new)}"
