"""YAML read safely, with the line of every key and item, and every fault reported with its line.

PyYAML's loader keeps only the last of two equal keys and forgets lines. Here the node tree is
walked instead: duplicate keys, keys that are not text, unknown tags, and structures that refer to
themselves become `fogline.faults.Fault`s. Ordered mappings (``!!omap``) are read as mappings.
"""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any, Final

import yaml

from fogline.faults import Fault, InputError
from fogline.text_files import read_text

Place = tuple[str | int, ...]
"""Keys and indices that lead to a value, outermost first."""

# Aliases can make a file of ten lines stand for billions of values; no honest file needs as many.
_MAX_VALUES: Final = 100_000
# Line ends to YAML, but not to editors: line numbers would go astray.
_NO_LINE_ENDS: Final = dict.fromkeys(map(ord, "\x85\u2028\u2029"), " ")
_MERGE_TAG: Final = "tag:yaml.org,2002:merge"
_OMAP_TAG: Final = "tag:yaml.org,2002:omap"


@dataclass(frozen=True)
class Document:
    """A YAML document as plain values, with the line of each.

    Parameters
    ----------
    value : Any
        Mappings, lists and scalars.
    lines : mapping of tuple to int
        1-based line of the key or item at each place.
    """

    value: Any
    lines: Mapping[Place, int] = field(repr=False)

    def line(self, place: Place) -> int:
        """Return the line of a place, or of the nearest place around it that the file has."""
        return next(
            self.lines[place[:n]] for n in range(len(place), -1, -1) if place[:n] in self.lines
        )


def dotted(place: Place) -> str:
    """Return a place as users write it, e.g. ``model.pivots[3]``."""
    text = "".join(f"[{key}]" if isinstance(key, int) else f".{key}" for key in place)
    return text.removeprefix(".")


def read_yaml(path: str | os.PathLike[str]) -> Document:
    """Return a YAML file as a `Document`.

    Parameters
    ----------
    path : path-like
        The file.

    Returns
    -------
    Document

    Raises
    ------
    InputError
        With every fault that keeps the file from being read.
    """
    path = os.fspath(path)
    faults: list[Fault] = []
    document = parse_yaml(read_text(path), path, faults)
    if document is None or faults:
        raise InputError(faults)
    return document


def parse_yaml(text: str, path: str, faults: list[Fault]) -> Document | None:
    """Return YAML text as a `Document`, appending what is wrong to `faults`.

    Parameters
    ----------
    text : str
        One YAML document whose first line is line 1 of the file.
    path : str
        The file, for the faults.
    faults : list of Fault
        Is appended to.

    Returns
    -------
    Document or None
        None where the text is no YAML. Faults may also have been added where a document is
        returned, for duplicate keys.
    """
    try:
        node = yaml.SafeLoader(text.translate(_NO_LINE_ENDS)).get_single_node()
    except yaml.YAMLError as error:
        faults.append(_yaml_fault(error, path))
        return None
    except RecursionError:
        faults.append(Fault(path, 1, "is nested too deeply"))
        return None
    if node is None:
        return Document(None, {(): 1})
    walk = _Walk(path, faults)
    try:
        return Document(walk.value(node, ()), walk.lines)
    except RecursionError:
        faults.append(Fault(path, 1, "is nested too deeply"))
    except _AbandonedError as stop:
        faults.append(stop.args[0])
    return None


def _yaml_fault(error: yaml.YAMLError, path: str) -> Fault:
    mark = getattr(error, "problem_mark", None) or getattr(error, "context_mark", None)
    context = getattr(error, "context", None)
    problem = getattr(error, "problem", None) or getattr(error, "reason", None) or "unreadable"
    what = f"{problem} {context}" if context else str(problem)
    line = 1 if mark is None else mark.line + 1
    return Fault(path, line, f"is not valid YAML: {' '.join(what.split())}")


class _AbandonedError(Exception):
    """The document cannot be read further; holds the fault."""


class _Walk:
    """One pass over the nodes of a document."""

    def __init__(self, path: str, faults: list[Fault]) -> None:
        self.path = path
        self.faults = faults
        self.lines: dict[Place, int] = {(): 1}
        self._scalars = yaml.SafeLoader("")
        self._open: set[int] = set()
        self._n_values = 0

    def fault(self, node: yaml.Node, what: str) -> Fault:
        return Fault(self.path, node.start_mark.line + 1, what)

    def value(self, node: yaml.Node, place: Place) -> Any:
        self._n_values += 1
        if id(node) in self._open:
            raise _AbandonedError(self.fault(node, "refers to itself by a YAML alias"))
        if self._n_values > _MAX_VALUES:
            raise _AbandonedError(self.fault(node, f"has more than {_MAX_VALUES} values"))
        self._open.add(id(node))
        try:
            return self._inside(node, place)
        finally:
            self._open.discard(id(node))

    def _inside(self, node: yaml.Node, place: Place) -> Any:
        if node.tag == _OMAP_TAG and isinstance(node, yaml.SequenceNode):
            return self._mapping(self._omap_pairs(node), place)
        if isinstance(node, yaml.MappingNode) and node.tag.endswith(":map"):
            return self._mapping(self._pairs(node), place)
        if isinstance(node, yaml.SequenceNode) and node.tag.endswith(":seq"):
            return [self._item(item, (*place, i)) for i, item in enumerate(node.value)]
        return self._scalar(node)

    def _item(self, node: yaml.Node, place: Place) -> Any:
        self.lines[place] = node.start_mark.line + 1
        return self.value(node, place)

    def _scalar(self, node: yaml.Node) -> Any:
        try:
            return self._scalars.construct_object(node, deep=True)
        except (yaml.YAMLError, ValueError, OverflowError, LookupError, AttributeError):
            shown = node.value if isinstance(node, yaml.ScalarNode) else node.tag
            self.faults.append(self.fault(node, f"cannot read the YAML value {str(shown)[:60]!r}"))
            return None

    def _mapping(self, pairs: Iterator[tuple[yaml.Node, yaml.Node, bool]], place: Place) -> Any:
        found: dict[str, Any] = {}
        own: dict[str, int] = {}
        for key_node, value_node, merged in pairs:
            key = self._key(key_node)
            if key is None or (merged and key in found):
                continue
            line = key_node.start_mark.line + 1
            if key in own:
                where = dotted((*place, key))
                what = f"key '{where}' stands twice, first in line {own[key]}; allowed once"
                self.faults.append(Fault(self.path, line, what))
                continue
            if not merged:
                own[key] = line
            self.lines[*place, key] = line
            found[key] = self.value(value_node, (*place, key))
        return found

    def _key(self, node: yaml.Node) -> str | None:
        key = self._scalar(node) if isinstance(node, yaml.ScalarNode) else node.tag
        if isinstance(key, str) and isinstance(node, yaml.ScalarNode):
            return key
        shown = node.value if isinstance(node, yaml.ScalarNode) else "a list or mapping"
        what = f"key {shown!s} is not text; put it in quotes where it is meant as a name"
        self.faults.append(self.fault(node, what))
        return None

    def _pairs(self, node: yaml.MappingNode) -> Iterator[tuple[yaml.Node, yaml.Node, bool]]:
        """Give the mapping's own pairs, then those of its ``<<`` merges, which yield to them."""
        own = [pair for pair in node.value if pair[0].tag != _MERGE_TAG]
        yield from ((key, value, False) for key, value in own)
        for key, value in node.value:
            if key.tag == _MERGE_TAG:
                yield from self._merged_pairs(value)

    def _merged_pairs(self, node: yaml.Node) -> Iterator[tuple[yaml.Node, yaml.Node, bool]]:
        sources = node.value if isinstance(node, yaml.SequenceNode) else [node]
        for source in sources:
            if not isinstance(source, yaml.MappingNode):
                raise _AbandonedError(self.fault(source, "'<<' must be given a mapping"))
            if id(source) in self._open:
                raise _AbandonedError(self.fault(source, "refers to itself by a YAML alias"))
            self._open.add(id(source))
            yield from ((key, value, True) for key, value, _ in self._pairs(source))
            self._open.discard(id(source))

    def _omap_pairs(self, node: yaml.SequenceNode) -> Iterator[tuple[yaml.Node, yaml.Node, bool]]:
        for item in node.value:
            if isinstance(item, yaml.MappingNode) and len(item.value) == 1:
                yield (*item.value[0], False)
            else:
                self.faults.append(self.fault(item, "an item of !!omap must be one 'key: value'"))
