"""The summary as HTML that opens offline, and as Markdown with links to the figures.

Both are made from the same `Summary`. HTML carries its figures in itself, has no script and asks
for nothing from anywhere; its tables scroll by themselves where a screen is narrow.
"""

from __future__ import annotations

import base64
import html
import re
from collections.abc import Callable, Iterator, Sequence
from itertools import groupby
from pathlib import Path
from typing import Final

from fogline.rounding import BEYOND, Rounded
from fogline.summary import DataSetLine, Number, Summary
from fogline.tables import write_whole

STYLE: Final = (
    ":root{color-scheme:light}"
    "body{font:16px/1.5 system-ui,sans-serif;margin:0 auto;padding:1em;max-width:60em;"
    "color:#222;background:#fff;overflow-wrap:anywhere}"
    "h1{font-size:1.6em;margin:.3em 0}h2{font-size:1.25em;margin:1.6em 0 .4em}"
    "ol.verdict{list-style:none;padding:0}"
    "ol.verdict li{border-left:.4em solid #777;padding:.3em .8em;margin:.5em 0;background:#f6f6f6}"
    "li.good{border-color:#009e73!important}li.mind{border-color:#e69f00!important}"
    "li.bad{border-color:#c00000!important}"
    ".wide{overflow-x:auto}table{border-collapse:collapse;font-size:.94em;overflow-wrap:normal}"
    "th,td{padding:.25em .7em;text-align:right;border-bottom:1px solid #ddd;vertical-align:top}"
    "th small{font-weight:normal}thead th{border-bottom:2px solid #444}.text{text-align:left}"
    "td.number{white-space:nowrap}.errors{display:inline-block;text-align:left;font-size:.75em;"
    "line-height:1.05;vertical-align:middle}"
    "figure{margin:1.2em 0}img{max-width:100%;height:auto}figcaption,small{color:#444}"
    "code{font-size:.92em;background:#eee;padding:0 .2em}"
    "@media print{body{max-width:none;padding:0;font-size:11pt}figure,li,tr{break-inside:avoid}}"
)

NUMBERS_NOTE: Final = (
    "Median with the bounds of the central 68% of posterior draws of the quantity itself, two "
    "digits of the smaller error."
)

DATASETS_NOTE: Final = (
    "Rows as listed in the file; parameters: effective number that the data set fixes; p: "
    "posterior predictive, near 0 for tension, near 1 for errors that are too large."
)


_KIND: Final = {True: "text", False: "number"}
"""Class of a column's head, by whether the column is aligned to the left."""


def write_pages(summary: Summary, folder: str | Path, page: str | Path, text: str | Path) -> None:
    """Write the summary as HTML and as Markdown.

    Parameters
    ----------
    summary : Summary
    folder : path-like
        Of the analysis, in which its figures are.
    page, text : path-like
        HTML and Markdown to write; the latter belongs into `folder`, for its links are relative.
    """
    for path, content in ((page, html_page(summary, folder)), (text, markdown_page(summary))):
        write_whole(path, _writer(content))


def _writer(content: str) -> Callable[[Path], object]:
    return lambda temporary: temporary.write_text(content, encoding="utf-8")


def html_page(summary: Summary, folder: str | Path) -> str:
    """Return the summary as one self-contained page.

    Parameters
    ----------
    summary : Summary
    folder : path-like
        Of the analysis.
    """
    title = html.escape(f"{summary.analysis}: summary")
    return (
        '<!doctype html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>{title}</title>\n<style>{STYLE}</style>\n</head>\n<body>\n<main>\n"
        f"<h1>{title}</h1>\n"
        + "".join(_html_sections(summary, Path(folder)))
        + f"</main>\n<footer><small>fogline {html.escape(summary.version)}; tables with units, "
        "definitions and provenance stand in <code>tables/</code>.</small></footer>\n"
        "</body>\n</html>\n"
    )


def _html_sections(summary: Summary, folder: Path) -> Iterator[str]:
    lines = "".join(
        f'<li class="{line.state}"><strong>{html.escape(line.question)} '
        f"{html.escape(line.answer)}.</strong> {_html(line.text)}</li>\n"
        for line in summary.verdict
    )
    yield _section("verdict", "Verdict", f'<ol class="verdict">\n{lines}</ol>\n')
    if len(summary.steps) > 1:
        items = "".join(
            f"<li><strong>{html.escape(step.title)}.</strong> {_html(step.text)}</li>\n"
            for step in summary.steps[1:]
        )
        yield _section("next", "After that", f"<ol>\n{items}</ol>\n")
    yield _section("numbers", "Main numbers", _html_numbers(summary.numbers))
    yield _section("data", "Data sets", _html_datasets(summary.datasets))
    items = "".join(f"<li>{_html(caution)}</li>\n" for caution in summary.cautions)
    yield _section("cautions", "Before you quote", f"<ul>\n{items}</ul>\n")
    figures = "".join(
        f'<figure id="{figure.name}">\n<img src="{_data_uri(folder / figure.path)}" '
        f'alt="{html.escape(figure.title, quote=True)}. {html.escape(figure.caption, quote=True)}">'
        f"\n<figcaption><strong>{html.escape(figure.title)}.</strong> "
        f"{html.escape(figure.caption)}</figcaption>\n</figure>\n"
        for figure in summary.figures
    )
    if figures:
        yield _section("figures", "Figures", figures)


def _section(name: str, title: str, body: str) -> str:
    return (
        f'<section aria-labelledby="{name}">\n<h2 id="{name}">{html.escape(title)}</h2>\n'
        f"{body}</section>\n"
    )


def _html_numbers(numbers: Sequence[Number]) -> str:
    rows = ""
    for _, group in groupby(numbers, key=lambda number: number.symbol):
        same = list(group)
        unit = f" [{html.escape(same[0].unit)}]" if same[0].unit else ""
        about = (
            f'<th scope="rowgroup" class="text" rowspan="{len(same)}">'
            f"{html.escape(same[0].symbol)}{unit}<br><small>"
            f"{html.escape(same[0].definition)}</small></th>"
        )
        for i, number in enumerate(same):
            rows += (
                f"<tr>{'' if i else about}<td>{number.z:g}</td>"
                f'<td class="number">{_html_number(number.rounded)}</td>'
                f'<td class="text">{html.escape("; ".join(number.remarks))}</td></tr>\n'
            )
    return _html_table(("quantity", "z", "value", "mind"), rows, NUMBERS_NOTE, left=(0, 3))


def _html_number(number: Rounded) -> str:
    if not number.plus or number.plus in (number.minus, BEYOND):
        return html.escape(number.text)
    errors = f'<span class="errors">+{number.plus}<br>−{number.minus}</span>'
    power = f" × 10<sup>{number.power}</sup>" if number.power else ""
    return f"{html.escape(number.value)} {errors}{power}"


def _html_datasets(datasets: Sequence[DataSetLine]) -> str:
    rows = "".join(
        f'<tr><th scope="row" class="text">{html.escape(data.name)}</th>'
        f'<td class="text">{html.escape(data.quantity)}</td><td>{data.n_rows}</td>'
        f"<td>{data.n_constrained:.2f}</td><td>{_p_text(data.p_value)}</td>"
        f'<td class="text">{html.escape("; ".join(data.flags)) or "none"}</td></tr>\n'
        for data in datasets
    )
    heads = ("data set", "quantity", "rows", "parameters", "p", "flags")
    return _html_table(heads, rows, DATASETS_NOTE, left=(0, 1, 5))


def _html_table(heads: Sequence[str], rows: str, note: str, left: Sequence[int]) -> str:
    head = "".join(
        f'<th scope="col" class="{_KIND[i in left]}">{html.escape(name)}</th>'
        for i, name in enumerate(heads)
    )
    return (
        f'<div class="wide">\n<table>\n<thead><tr>{head}</tr></thead>\n<tbody>\n{rows}</tbody>\n'
        f"</table>\n</div>\n<p><small>{html.escape(note)}</small></p>\n"
    )


def _html(text: str) -> str:
    """Return text with what stands between backticks as code."""
    return re.sub(r"`([^`]*)`", r"<code>\1</code>", html.escape(text))


def _data_uri(path: Path) -> str:
    return "data:image/png;base64," + base64.b64encode(path.read_bytes()).decode("ascii")


def _p_text(p_value: float) -> str:
    return "< 0.001" if p_value < 0.001 else f"{p_value:.3f}"


def markdown_page(summary: Summary) -> str:
    """Return the summary as Markdown, with figures as relative links.

    Parameters
    ----------
    summary : Summary
    """
    return "\n".join(_markdown_lines(summary)) + "\n"


def _markdown_lines(summary: Summary) -> Iterator[str]:
    yield f"# {_md(summary.analysis)}: summary"
    yield "\n## Verdict\n"
    for i, line in enumerate(summary.verdict, 1):
        yield f"{i}. **{line.question} {line.answer}.** {_md(line.text)}"
    if len(summary.steps) > 1:
        yield "\n## After that\n"
        for i, step in enumerate(summary.steps[1:], 1):
            yield f"{i}. **{step.title}.** {_md(step.text)}"
    yield "\n## Main numbers\n"
    yield "| quantity | z | value | definition | mind |\n|---|---:|---:|---|---|"
    for n in summary.numbers:
        cells = (n.symbol, f"{n.z:g}", n.text, n.definition, "; ".join(n.remarks))
        yield f"| {' | '.join(_md(cell) for cell in cells)} |"
    yield f"\n{NUMBERS_NOTE}"
    yield "\n## Data sets\n"
    yield "| data set | quantity | rows | parameters | p | flags |\n|---|---|---:|---:|---:|---|"
    for data in summary.datasets:
        numbers = (str(data.n_rows), f"{data.n_constrained:.2f}", _md(_p_text(data.p_value)))
        flags = _md("; ".join(data.flags)) or "none"
        yield f"| `{data.name}` | `{data.quantity}` | {' | '.join(numbers)} | {flags} |"
    yield f"\n{DATASETS_NOTE}"
    yield "\n## Before you quote\n"
    yield from (f"* {_md(caution)}" for caution in summary.cautions)
    if summary.figures:
        yield "\n## Figures"
    for figure in summary.figures:
        yield f"\n![{_md(figure.title)}]({figure.path})\n\n*{figure.title}.* {_md(figure.caption)}"
    yield f"\nfogline {summary.version}; units, definitions and provenance stand in `tables/`."


def _md(text: str) -> str:
    """Return text with Markdown's own signs escaped, but for code between backticks."""
    parts = text.split("`")
    parts[::2] = [re.sub(r"([\\*\[\]<>|])", r"\\\1", part) for part in parts[::2]]
    return "`".join(parts)
