"""The config's schema (``schemas/config.yaml``): validation, defaults, reference.

jsonschema finds what is wrong; the messages are made here, since its own dump the schema. Keys
that an analysis may inherit are not ``required`` in the sense of JSON schema but ``x-required``:
they must be there once all blocks are merged.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Iterator, Mapping
from importlib import resources
from typing import Any, Final, cast

import yaml
from jsonschema import Draft202012Validator, ValidationError

from fogline.cosmology_keys import text_number_hint
from fogline.faults import nearest
from fogline.yaml_lines import Place, dotted

Schema = Mapping[str, Any]
PlacedFault = tuple[Place, str]
"""Where in the config something is wrong, and what."""

MISSING: Final[Any] = object()


@functools.cache
def schema() -> Schema:
    """Return the config's schema as the package ships it."""
    file = resources.files("fogline").joinpath("schemas/config.yaml")
    # libyaml where PyYAML has it: ten times faster, and the workflow does this at every start.
    loader = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
    return yaml.load(file.read_text(encoding="utf-8"), Loader=loader)


def resolve(node: Schema, value: Any = MISSING) -> Schema:
    """Return a node with its ``$ref`` followed, and the branch of ``anyOf`` that fits a value."""
    while "$ref" in node:
        target = schema()["$defs"][node["$ref"].rsplit("/", 1)[1]]
        node = {**target, **{key: node[key] for key in node if key != "$ref"}}
    if "anyOf" in node and value is not MISSING:
        kind = "array" if isinstance(value, list) else "object"
        branches = [resolve(branch) for branch in node["anyOf"]]
        return next((branch for branch in branches if branch["type"] == kind), node)
    return node


def schema_faults(config: Mapping[str, Any]) -> Iterator[PlacedFault]:
    """Give everything in a config that breaks the schema, missing keys aside.

    Parameters
    ----------
    config : mapping
        The whole config, or the blocks of one analysis.

    Yields
    ------
    tuple
        Place and fault.
    """
    for error in Draft202012Validator(schema()).iter_errors(config):
        yield from _explain(error)
    yield from _not_finite(config, ())


def _explain(error: ValidationError) -> Iterator[PlacedFault]:
    place: Place = tuple(error.absolute_path)
    node: Any = error.schema
    if error.validator == "additionalProperties":
        yield from _unknown_keys(error, place)
    elif error.validator == "anyOf":
        yield from _explain_branch(error, place)
    else:
        name, allowed = dotted(place) or "config", expectation(node)
        hint = text_number_hint(error.instance)
        if error.validator == "enum":
            near = nearest(str(error.instance), node["enum"])
            hint = f"; {near}" if near.startswith("did") else ""
        yield place, f"{name} is {shown(error.instance)}, must be {allowed}{hint}"


def _unknown_keys(error: ValidationError, place: Place) -> Iterator[PlacedFault]:
    node, found = cast(Schema, error.schema), cast(Mapping[str, Any], error.instance)
    known = list(node.get("properties", {}))
    for key in found:
        if key not in known:
            where = dotted((*place, str(key)))
            yield (*place, key), f"unknown key '{where}'; {nearest(str(key), known)}"


def _explain_branch(error: ValidationError, place: Place) -> Iterator[PlacedFault]:
    node: Any = error.schema
    kind = "array" if isinstance(error.instance, list) else "object"
    kind = kind if isinstance(error.instance, list | Mapping) else "scalar"
    branches = [resolve(branch)["type"] for branch in node["anyOf"]]
    if kind not in branches:
        what = f"{dotted(place)} is {shown(error.instance)}, must be {expectation(node)}"
        yield place, what + text_number_hint(error.instance)
        return
    for inner in error.context or ():
        if inner.schema_path[0] == branches.index(kind):
            yield from _explain(inner)


def _not_finite(value: Any, place: Place) -> Iterator[PlacedFault]:
    if isinstance(value, float) and not math.isfinite(value):
        yield place, f"{dotted(place)} is {value}, must be finite"
    items: Any = value.items() if isinstance(value, Mapping) else ()
    for key, item in enumerate(value) if isinstance(value, list) else items:
        yield from _not_finite(item, (*place, key))


def expectation(node: Schema) -> str:
    """Return in words what a node of the schema allows."""
    if "x-expect" in node:
        return str(node["x-expect"])
    if "enum" in node:
        return " | ".join(node["enum"])
    kind = node.get("type", "anything")
    kind = kind[0] if isinstance(kind, list) else kind
    words = {"number": "a number", "integer": "a whole number", "string": "text"}.get(kind, kind)
    bounds = {"minimum": ">=", "exclusiveMinimum": ">", "maximum": "<=", "exclusiveMaximum": "<"}
    limits = [f"{sign} {node[key]}" for key, sign in bounds.items() if key in node]
    return f"{words} {' and '.join(limits)}".strip()


def shown(value: Any) -> str:
    """Return a value as a message shows it."""
    text = "empty" if value is None else repr(value)
    return text if len(text) <= 60 else f"{text[:57]}..."


def missing_faults(node: Schema, value: Any, place: Place) -> Iterator[PlacedFault]:
    """Give the ``x-required`` keys that merged blocks lack.

    Parameters
    ----------
    node : mapping
        Node of the schema.
    value : Any
        What stands there.
    place : tuple
        Where that is.

    Yields
    ------
    tuple
        Place and fault.
    """
    node = resolve(node, value)
    if isinstance(value, list):
        for i, item in enumerate(value):
            yield from missing_faults(node.get("items", {}), item, (*place, i))
    if not isinstance(value, Mapping):
        return
    properties = node.get("properties", {})
    for key in node.get("x-required", ()):
        if key not in value:
            help = resolve(properties[key]).get("description", "").rstrip(".")
            yield place, f"lacks '{dotted((*place, key))}' ({help[0].lower()}{help[1:]})"
    others = node.get("additionalProperties")
    others = others if isinstance(others, Mapping) else {}
    for key in value:
        yield from missing_faults(properties.get(key, others), value[key], (*place, key))


def with_defaults(node: Schema, value: Any) -> Any:
    """Return merged blocks with the schema's defaults where they are silent.

    Parameters
    ----------
    node : mapping
        Node of the schema.
    value : Any
        What stands there; `MISSING` where nothing does.

    Returns
    -------
    Any
        `MISSING` where there is neither a value nor a default.
    """
    if value is MISSING and "default" in node:
        return node["default"]
    node = resolve(node, value)
    if "properties" not in node or not (value is MISSING or isinstance(value, Mapping)):
        return node.get("default", MISSING) if value is MISSING else value
    given: Mapping[str, Any] = {} if value is MISSING else value
    filled = {
        key: with_defaults(child, given.get(key, MISSING))
        for key, child in node["properties"].items()
    }
    return {**given, **{key: item for key, item in filled.items() if item is not MISSING}}
