"""Tables as self-contained pages, for the report and for readers without software."""

from __future__ import annotations

import html
import math
from pathlib import Path
from typing import Any

from astropy.table import Table

from fogline.tables import read_table, write_whole

STYLE = (
    "body{font:15px/1.4 system-ui,sans-serif;margin:2em;color:#222}"
    "table{border-collapse:collapse}th,td{padding:.25em .8em;text-align:right;"
    "border-bottom:1px solid #ddd}th{border-bottom:2px solid #444;vertical-align:bottom}"
    "td.text,th.text{text-align:left}p{max-width:50em}"
)


def render_table(path: str | Path, page: str | Path) -> None:
    """Turn an ECSV table into an HTML page with definition, units and descriptions.

    Parameters
    ----------
    path : path-like
        The table.
    page : path-like
        The page to write.
    """
    text = table_page(read_table(path), Path(path).stem.replace("_", " "))
    write_whole(page, lambda temporary: temporary.write_text(text, encoding="utf-8"))


def table_page(table: Table, title: str) -> str:
    """Return the page of a table.

    Parameters
    ----------
    table : astropy.table.Table
    title : str
    """
    heads = "".join(_head(table, name) for name in table.colnames)
    rows = "".join(
        "<tr>" + "".join(_cell(row[name]) for name in table.colnames) + "</tr>\n" for row in table
    )
    about = html.escape(str(table.meta.get("definition", "")))
    origin = ", ".join(
        f"{key} {table.meta[key]}" for key in ("analysis", "fogline_version") if key in table.meta
    )
    return (
        f'<!doctype html><html lang="en"><head><meta charset="utf-8"><title>{title}</title>'
        f"<style>{STYLE}</style></head><body><h1>{title}</h1><p>{about}</p>"
        f"<table><thead><tr>{heads}</tr></thead><tbody>\n{rows}</tbody></table>"
        f"<p><small>{html.escape(origin)}</small></p></body></html>\n"
    )


def _head(table: Table, name: str) -> str:
    column = table[name]
    unit = f"<br><small>{html.escape(str(column.unit))}</small>" if column.unit else ""
    about = html.escape(column.description or "", quote=True)
    kind = "" if column.dtype.kind in "fiu" else ' class="text"'
    return f'<th{kind} title="{about}">{html.escape(name)}{unit}</th>'


def _cell(value: Any) -> str:
    if isinstance(value, str):
        return f'<td class="text">{html.escape(value)}</td>'
    if isinstance(value, float) and not math.isfinite(value):
        return f"<td>{'beyond reach' if value > 0 else ''}</td>"
    return f"<td>{value:.5g}</td>" if isinstance(value, float) else f"<td>{value}</td>"
