"""The reference of the config in ``config/README.md``, made from the schema.

``python -m fogline.config_reference config/README.md`` writes it anew; a test fails where the
file and the schema do not agree.
"""

from __future__ import annotations

import sys
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Final

import yaml

from fogline.config_schema import Schema, expectation, resolve, schema
from fogline.yaml_lines import Place, dotted

BEGIN: Final = "<!-- keys: made by python -m fogline.config_reference -->"
NAMED: Final = ("analyses", "forecasts")
"""Blocks whose keys are names that the user chooses."""

END: Final = "<!-- end of keys -->"


def config_reference() -> str:
    """Return a Markdown reference of every key of the config, made from the schema."""
    lines = ["| key | holds | allowed | default |", "|---|---|---|---|"]
    for place, node, required in _keys(schema(), ()):
        default = _default_text(node, required)
        what = str(node.get("description", ""))
        cells = [f"`{dotted(place)}`", what, expectation(node), default]
        lines.append(f"| {' | '.join(cell.replace('|', chr(92) + '|') for cell in cells)} |")
    return "\n".join(lines) + "\n"


def _default_text(node: Schema, required: bool) -> str:
    if "default" in node:
        text = yaml.safe_dump(node["default"], default_flow_style=True, width=1000)
        return f"`{text.removesuffix('...' + chr(10)).strip()}`"
    return "required" if required else ""


def _keys(node: Schema, place: Place) -> Iterator[tuple[Place, Schema, bool]]:
    """Give every key of the config; the blocks of an analysis only once, at the top."""
    required = node.get("x-required", ())
    for key, child in node.get("properties", {}).items():
        inner = resolve(child)
        yield (*place, key), inner, key in required
        if place[:1] == ("analyses",) and key in schema()["properties"]:
            continue
        if child.get("$ref") != "#/$defs/distribution":
            yield from _keys(resolve(child, {}), (*place, key))
        if isinstance(inner.get("items"), Mapping) and "properties" in inner["items"]:
            yield from _keys(inner["items"], (*place, f"{key}[]"))
        if isinstance(inner.get("additionalProperties"), Mapping) and key in NAMED:
            named = (*place, key, "NAME")
            yield named, resolve(inner["additionalProperties"]), key == "analyses"
            yield from _keys(resolve(inner["additionalProperties"]), named)


def update(text: str) -> str:
    """Return a text with the reference between its marks made anew.

    Parameters
    ----------
    text : str
        Markdown that holds `BEGIN` and `END`.

    Returns
    -------
    str
    """
    before, rest = text.split(BEGIN)
    return f"{before}{BEGIN}\n{config_reference()}{END}{rest.split(END)[1]}"


if __name__ == "__main__":
    for path in map(Path, sys.argv[1:]):
        path.write_text(update(path.read_text(encoding="utf-8")), encoding="utf-8")
