"""Configs: read, validated completely, and turned into a `Study` of frozen settings.

A config states blocks (cosmology, model, sampler, derive) and analyses; an analysis overrides
blocks key by key and may inherit from another by ``base``. The schema says which keys there are
(``config/README.md`` is made from it); everything wrong is found at once and reported with its
line. The workflow imports this module at every start: it pulls in yaml and jsonschema only.
"""

from __future__ import annotations

import os
import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace
from typing import Any, Final

from fogline.config_checks import block_faults, distribution_faults
from fogline.config_datasets import Pattern, find_files
from fogline.config_layers import Layers
from fogline.config_schema import (
    MISSING,
    PlacedFault,
    missing_faults,
    schema,
    schema_faults,
    with_defaults,
)
from fogline.config_settings import analysis_settings
from fogline.faults import Fault, InputError, nearest
from fogline.settings import DEFAULT_OVERLAYS, AnalysisSettings, Study
from fogline.yaml_lines import Place, read_yaml

_NAME: Final = re.compile(r"[A-Za-z0-9_-]+")

RESERVED: Final = {
    "comparison": "the folder of the comparison of analyses",
    "families": "the folder of families of analyses",
}
"""Names that no analysis may have: their folders hold something else."""

LineOf = Callable[[Place], int]


def load_config(path: str | os.PathLike[str]) -> Study:
    """Return the study that a config file states.

    Parameters
    ----------
    path : path-like
        YAML file.

    Returns
    -------
    Study

    Raises
    ------
    InputError
        With every fault of the file.
    """
    document = read_yaml(path)
    return parse_config(document.value, os.fspath(path), document.line)


def parse_config(
    config: Mapping[str, Any], path: str = "config", line_of: LineOf = lambda place: 1
) -> Study:
    """Return the study that a config states.

    Parameters
    ----------
    config : mapping
        What the config's YAML holds.
    path : str
        The file, for the faults.
    line_of : callable
        Line of the file at which a place (a tuple of keys) stands.

    Returns
    -------
    Study

    Raises
    ------
    InputError
        With every fault.
    """
    faults = _Faults(path, line_of)
    if not isinstance(config, Mapping) or not config:
        faults.add((), "config must be a mapping with the keys cosmology, model, analyses")
        raise InputError(faults.found)
    config = dict(config)
    faults.extend(schema_faults(config))
    faults.extend(_missing_at_top(config))
    faults.extend(_previous_faults(config))
    blocks = config.get("analyses")
    blocks = blocks if isinstance(blocks, Mapping) else {}
    chains = {name: _chain(name, blocks, faults) for name in blocks}
    analyses = {
        name: _analysis(name, chain, config, faults) for name, chain in chains.items() if chain
    }
    families = config.get("families")
    families = families if isinstance(families, Mapping) else {}
    for place, what in _family_faults(families, analyses) if not faults.found else ():
        faults.add(place, what)
    if faults.found:
        raise InputError(faults.found)
    return Study(
        {name: made for name, made in analyses.items() if made is not None},
        tuple(config.get("overlays") or DEFAULT_OVERLAYS),
        config.get("compare_with"),
        {name: tuple(members) for name, members in families.items()},
        config,
    )


def check_distributions(
    study: Study, path: str = "config", line_of: LineOf = lambda place: 1
) -> list[Fault]:
    """Return what is wrong with the distributions that a study names; imports scipy.

    Parameters
    ----------
    study : Study
        From `load_config` or `parse_config`.
    path, line_of
        As for `parse_config`.

    Returns
    -------
    list of Fault
    """
    faults = _Faults(path, line_of)
    for name in study.analyses:
        chain = _chain(name, study.raw["analyses"], faults)
        layers = _layers(chain, study.raw)
        for place, what in distribution_faults(study, name):
            faults.add(layers.origin(place), what)
    return sorted(set(faults.found))


def check_forecasts(
    study: Study, path: str = "config", line_of: LineOf = lambda place: 1
) -> list[Fault]:
    """Return what is wrong with the candidates that a study would forecast; imports numpy.

    Parameters
    ----------
    study : Study
        From `load_config` or `parse_config`.
    path, line_of
        As for `parse_config`.

    Returns
    -------
    list of Fault
    """
    if not any(analysis.forecasts for analysis in study.analyses.values()):
        return []
    from fogline.trust.candidates import candidate_faults

    faults = _Faults(path, line_of)
    for name, analysis in study.analyses.items():
        layers = _layers(_chain(name, study.raw["analyses"], faults), study.raw)
        for place, what in candidate_faults(analysis):
            faults.add(layers.origin(place), what)
    return sorted(set(faults.found))


class _Faults:
    """Gathers faults by their place in the config."""

    def __init__(self, path: str, line_of: LineOf) -> None:
        self.found: list[Fault] = []
        self._path = path
        self._line_of = line_of

    def add(self, place: Place, what: str) -> None:
        self.found.append(Fault(self._path, self._line_of(place), what))

    def extend(self, placed: Any) -> None:
        for place, what in placed:
            self.add(place, what)


def _family_faults(
    families: Mapping[str, Any], analyses: Mapping[str, AnalysisSettings | None]
) -> Iterator[PlacedFault]:
    """Give what is wrong with families of analyses: only models of the same data compare."""
    for family, members in families.items():
        place: Place = ("families", family)
        if not _NAME.fullmatch(str(family)):
            yield place, f"family is named '{family}', must be letters, digits, '_' and '-'"
        for i, member in enumerate(members):
            if member not in analyses:
                what = f"families.{family}: '{member}' is no analysis; {nearest(member, analyses)}"
                yield (*place, i), what
        known = [analyses[m] for m in members if analyses.get(m) is not None]
        if len(set(members)) < max(2, len(members)):
            yield place, f"families.{family} must be two different analyses or more"
        first = known[0] if known else None
        for other in known[1:]:
            assert first is not None
            assert other is not None
            for key in ("datasets", "nuisances", "cosmology", "derive"):
                if getattr(other, key) != getattr(first, key):
                    what = f"families.{family}: '{other.name}' has not the {key} of '{first.name}'"
                    yield place, f"{what}; only models of the same data can be weighed"


def _previous_faults(config: Mapping[str, Any]) -> Iterator[PlacedFault]:
    """Give what is wrong with the previous results folder."""
    folder, analyses = config.get("compare_with"), config.get("analyses")
    if not isinstance(folder, str) or not isinstance(analyses, Mapping):
        return
    if not os.path.isdir(folder):
        yield ("compare_with",), f"compare_with is '{folder}', but there is no such folder"
    elif not any(os.path.isdir(os.path.join(folder, str(a), "tables")) for a in analyses):
        what = f"compare_with is '{folder}', which has results of none of the analyses"
        yield ("compare_with",), f"{what} {', '.join(map(str, analyses))} (NAME/tables/)"


def _missing_at_top(config: Mapping[str, Any]) -> list[tuple[Place, str]]:
    """Return the fault of a config without analyses; other blocks are missed by analyses."""
    if "analyses" in config:
        return []
    return [((), "lacks 'analyses' (the fits by name)")]


def _chain(name: str, blocks: Mapping[str, Any], faults: _Faults) -> tuple[str, ...]:
    """Return the analyses that one is made of, itself last; empty where that cannot be told."""
    if not _NAME.fullmatch(str(name)):
        what = f"analysis is named '{name}', must be letters, digits, '_' and '-'"
        faults.add(("analyses", name), f"{what} (it names outputs)")
        return ()
    if name in RESERVED:
        what = f"analysis is named '{name}', which is {RESERVED[name]}"
        faults.add(("analyses", name), f"{what}; choose another name")
        return ()
    chain = [name]
    while isinstance(blocks[chain[0]], Mapping) and "base" in blocks[chain[0]]:
        place: Place = ("analyses", chain[0], "base")
        base = blocks[chain[0]]["base"]
        if not isinstance(base, str):
            return ()
        if base not in blocks:
            faults.add(place, f"base '{base}' is no analysis; {nearest(base, map(str, blocks))}")
            return ()
        if base in chain:
            faults.add(place, f"base '{base}' makes a circle: {' <- '.join([base, *chain])}")
            return ()
        chain.insert(0, base)
    return tuple(chain) if isinstance(blocks[chain[0]], Mapping) else ()


def _layers(chain: tuple[str, ...], config: Mapping[str, Any]) -> Layers:
    own = [(("analyses", name), config["analyses"][name]) for name in chain]
    return Layers((((), config), *own))


def _analysis(
    name: str, chain: tuple[str, ...], config: Mapping[str, Any], faults: _Faults
) -> AnalysisSettings | None:
    layers = _layers(chain, config)
    files = find_files(*_patterns(name, chain, config, faults), faults.add)
    blocks = layers.merged()
    if faults.found and any(True for _ in schema_faults(blocks)):
        return None  # said already, at the place where it stands
    required = ("cosmology", "model")
    missing: list[PlacedFault] = [
        ((), f"lacks '{key}' for analysis '{name}'") for key in required if key not in blocks
    ]
    for key in blocks:
        missing.extend(missing_faults(schema()["properties"][key], blocks[key], (key,)))
    if not missing:
        blocks = _with_defaults(blocks)
        missing.extend(block_faults(blocks, name))
        missing.extend(_unknown_datasets(blocks, files))
    for place, what in missing:
        faults.add(layers.origin(place) if place else (), what)
    if missing:
        return None
    on_request = config["analyses"][name].get("on_request") is True
    return replace(analysis_settings(name, files, blocks), on_request=on_request)


def _unknown_datasets(blocks: Mapping[str, Any], files: tuple[str, ...]) -> Iterator[PlacedFault]:
    stems = [os.path.splitext(os.path.basename(path))[0] for path in files]
    named: list[tuple[Place, Any]] = [(("nuisances", name), name) for name in blocks["nuisances"]]
    for group, members in blocks["checks"]["groups"].items():
        place: Place = ("checks", "groups", group)
        if not _NAME.fullmatch(str(group)) or group in stems:
            what = f"checks.groups: a group is named '{group}', must be letters, digits, '_' and "
            yield place, f"{what}'-', and not the name of a data set"
        named += [((*place, i), member) for i, member in enumerate(members)]
    for place, name in named:
        if name not in stems:
            what = f"{place[0]}: the analysis has no data set '{name}'; {nearest(str(name), stems)}"
            yield place, what


def _with_defaults(blocks: Mapping[str, Any]) -> dict[str, Any]:
    keys = schema()["properties"]
    return {
        key: with_defaults(keys[key], blocks.get(key, MISSING)) for key in keys if key != "analyses"
    }


def _patterns(
    name: str, chain: tuple[str, ...], config: Mapping[str, Any], faults: _Faults
) -> tuple[list[Pattern], list[Pattern]]:
    """Return the patterns of the data sets of an analysis, and those that it leaves out."""
    datasets: list[Pattern] = []
    exclude: list[Pattern] = []
    for link in chain:
        block, place = config["analyses"][link], ("analyses", link)
        if "datasets" in block:  # a new choice of files starts from nothing left out
            datasets, exclude = _listed(block, "datasets", place), []
        exclude = [*exclude, *_listed(block, "exclude", place)]
    if not any("datasets" in config["analyses"][link] for link in chain):
        what = f"analysis '{name}' lacks 'datasets' (constraint files), or a 'base' that has them"
        faults.add(("analyses", name), what)
    return datasets, exclude


def _listed(block: Mapping[str, Any], key: str, place: Place) -> list[Pattern]:
    found = block.get(key, [])
    items = enumerate(found if isinstance(found, list) else [])
    return [((*place, key, i), item) for i, item in items if item and isinstance(item, str)]


__all__ = ["check_distributions", "check_forecasts", "load_config", "parse_config"]
