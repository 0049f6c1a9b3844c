"""Checks on the merged blocks of one analysis that a schema cannot express."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

from fogline.config_forecasts import forecast_faults
from fogline.config_schema import PlacedFault
from fogline.config_settings import HIGH_COLUMN_PRIORS
from fogline.cosmology_keys import cosmology_faults
from fogline.faults import nearest
from fogline.settings import BACKGROUNDS, Study
from fogline.yaml_lines import Place, dotted

_MOST_REDSHIFTS = 10_000

FREE_NUISANCES = ("scale", "scatter")
"""Keys of ``nuisances`` that add a parameter each."""


def block_faults(blocks: Mapping[str, Any], name: str) -> Iterator[PlacedFault]:
    """Give what is wrong with the blocks of one analysis.

    Parameters
    ----------
    blocks : mapping
        Merged, valid by the schema, with defaults.
    name : str
        The analysis.

    Yields
    ------
    tuple
        Place within the blocks, and fault.
    """
    for key, what in cosmology_faults(blocks["cosmology"]):
        yield ("cosmology", *[key][: bool(key)]), what
    yield from _model_faults(blocks["model"])
    yield from _sampler_faults(blocks, name)
    yield from _derive_faults(blocks["derive"])
    yield from forecast_faults(blocks["forecasts"])


def _increasing(values: Sequence[float], place: Place) -> Iterator[PlacedFault]:
    for i in range(1, len(values)):
        if not values[i] > values[i - 1]:
            what = f"{dotted(place)} must increase, but {values[i]:g} follows {values[i - 1]:g}"
            yield (*place, i), what


def _model_faults(model: Mapping[str, Any]) -> Iterator[PlacedFault]:
    pivots, evolution = model["pivots"], model["evolution"]
    yield from _increasing(pivots, ("model", "pivots"))
    place: Place = ("model", "evolution", "pivots")
    yield from _increasing(evolution["pivots"], place)
    for i, pivot in enumerate(evolution["pivots"]):
        if not pivots[0] <= pivot <= pivots[-1]:
            what = (
                f"evolution pivot {pivot:g} lies outside the pivots of the model, "
                f"{pivots[0]:g} to {pivots[-1]:g}"
            )
            yield (*place, i), what
    yield from _increasing(evolution["breaks"], ("model", "evolution", "breaks"))
    yield from _prior_faults(model)
    if model["high_column"] is not None:
        yield from _high_column_faults(model)


def _high_column_faults(model: Mapping[str, Any]) -> Iterator[PlacedFault]:
    high, pivots = model["high_column"], model["pivots"]
    place: Place = ("model", "high_column")
    allowed = pivots[2:-1]
    if high["above"] not in allowed:
        listed = ", ".join(f"{pivot:g}" for pivot in allowed) or "none here: there are too few"
        what = f"model.high_column.above is {high['above']:g}, must be one of the pivots {listed}"
        yield (*place, "above"), f"{what} (two below it, one above where f ends)"
    anchor = model["prior"]["anchor"].get("log_nhi")
    if anchor is not None and anchor > high["above"]:
        what = f"model.prior.anchor.log_nhi is {anchor:g}, must be at most model.high_column.above"
        yield ("model", "prior", "anchor", "log_nhi"), f"{what} = {high['above']:g}"
    known = HIGH_COLUMN_PRIORS[high["form"]]
    for name in high["prior"]:
        if name not in known:
            what = f"{high['form']} has no parameter '{name}'; {nearest(str(name), known)}"
            yield (*place, "prior", name), what


def _prior_faults(model: Mapping[str, Any]) -> Iterator[PlacedFault]:
    pivots, evolution = model["pivots"], model["evolution"]
    priors, n = evolution["prior"], len(evolution["pivots"])
    if isinstance(priors, list) and len(priors) != n:
        what = f"model.evolution.prior lists {len(priors)} distributions, must be one or {n}"
        yield ("model", "evolution", "prior"), f"{what} (one for each evolution pivot)"
    anchor = model["prior"]["anchor"].get("log_nhi")
    if anchor is not None and anchor not in pivots:
        allowed = ", ".join(f"{pivot:g}" for pivot in pivots)
        what = f"model.prior.anchor.log_nhi is {anchor:g}, must be one of the pivots: {allowed}"
        yield ("model", "prior", "anchor", "log_nhi"), what


def _sampler_faults(blocks: Mapping[str, Any], name: str) -> Iterator[PlacedFault]:
    sampler = blocks["sampler"]
    n = _n_parameters(blocks)
    walkers = sampler["walkers"]
    if walkers % 2 or walkers < 2 * n:
        what = (
            f"sampler.walkers is {walkers}, must be even and at least {2 * n}, "
            f"twice the {n} parameters of analysis '{name}'"
        )
        yield ("sampler", "walkers"), what
    rounds, components = len(sampler["warm_up"]), len(sampler["components"])
    if rounds != components:
        what = (
            f"sampler.components lists {components} numbers, must be {rounds}, "
            "one for each round of sampler.warm_up"
        )
        yield ("sampler", "components"), what


def _n_parameters(blocks: Mapping[str, Any]) -> int:
    """Return the number of parameters, without those that constraint files ask for themselves."""
    model = blocks["model"]
    evolution, high = model["evolution"], model["high_column"]
    n = len(evolution["pivots"]) * (len(evolution["breaks"]) + 1)
    if high is None:
        n += len(model["pivots"])
    else:
        n += sum(pivot <= high["above"] for pivot in model["pivots"])
        n += len(HIGH_COLUMN_PRIORS[high["form"]])
    n += sum(isinstance(value, Mapping) for value in model["doppler"].values())
    free = [block.get(kind) for block in blocks["nuisances"].values() for kind in FREE_NUISANCES]
    return n + sum(prior is not None for prior in free)


def _derive_faults(derive: Mapping[str, Any]) -> Iterator[PlacedFault]:
    grid = derive["redshifts"]
    place: Place = ("derive", "redshifts")
    if isinstance(grid, list):
        yield from _increasing(grid, place)
    elif grid["stop"] < grid["start"]:
        what = f"derive.redshifts.stop is {grid['stop']:g}, must be at least start"
        yield (*place, "stop"), f"{what} = {grid['start']:g}"
    elif (grid["stop"] - grid["start"]) / grid["step"] > _MOST_REDSHIFTS:
        what = f"derive.redshifts.step is {grid['step']:g}, which makes more than {_MOST_REDSHIFTS}"
        yield (*place, "step"), f"{what} redshifts"
    yield from _increasing(derive["column_redshifts"], ("derive", "column_redshifts"))
    yield from _increasing(derive["source_redshifts"], ("derive", "source_redshifts"))
    yield from _filter_faults(derive["filters"])
    given = [kind for kind in BACKGROUNDS if derive["background"].get(kind)]
    place = ("derive", "background")
    if len(given) > 1:
        yield (*place, given[1]), f"{dotted(place)} has {' and '.join(given)}; allowed is one"
    for kind in given:
        file = derive["background"][kind]
        if not os.path.isfile(file):
            what = f"{dotted((*place, kind))} names {file!r}, but there is no such file"
            yield (*place, kind), what


def _filter_faults(filters: Sequence[Any]) -> Iterator[PlacedFault]:
    names: list[str] = []
    for i, item in enumerate(filters):
        place: Place = ("derive", "filters", i)
        name = item["name"] if isinstance(item, Mapping) else Path(item).stem
        if not isinstance(item, Mapping) and not os.path.isfile(item):
            yield place, f"{dotted(place)} names {item!r}, but there is no such file"
        elif isinstance(item, Mapping) and not item["lo"] < item["hi"]:
            what = f"{dotted((*place, 'hi'))} is {item['hi']:g}, must be greater than lo"
            yield (*place, "hi"), f"{what} = {item['lo']:g}"
        if name in names:
            yield place, f"{dotted(place)} is a second filter named '{name}'"
        names.append(name)


def distribution_faults(study: Study, name: str) -> Iterator[PlacedFault]:
    """Give what is wrong with the distributions of one analysis.

    Apart from the other checks because it imports scipy, which takes longer than all the rest.

    Parameters
    ----------
    study : Study
        Valid otherwise.
    name : str
        The analysis.

    Yields
    ------
    tuple
        Place within the blocks, and fault.
    """
    from fogline.distributions import frozen, positive

    analysis = study.analyses[name]
    model = analysis.model
    priors = model.evolution.priors
    # One distribution for all pivots is one fault, not one for each of them.
    same = all(prior == priors[0] for prior in priors)
    evolution = [((), priors[0])] if same else [((i,), prior) for i, prior in enumerate(priors)]
    checks: list[tuple[Place, Callable[[Any], Any], Any]] = [
        (("model", "doppler"), _doppler, model.doppler),
        (("model", "prior", "anchor"), frozen, model.prior.anchor),
        (("model", "prior", "slope", "first"), positive, model.prior.first_slope),
        *((("model", "evolution", "prior", *i), frozen, prior) for i, prior in evolution),
    ]
    if model.prior.slope_step is not None:
        checks.append((("model", "prior", "slope", "step"), frozen, model.prior.slope_step))
    if model.high_column is not None:
        names = HIGH_COLUMN_PRIORS[model.high_column.form]
        for key, prior in zip(names, model.high_column.priors, strict=True):
            checks.append((("model", "high_column", "prior", key), frozen, prior))
    if analysis.derive.dust is not None:
        depth = analysis.derive.dust["optical_depth"]
        checks.append((("derive", "dust", "optical_depth"), positive, depth))
    for dataset, block in analysis.nuisances.items():
        for kind in FREE_NUISANCES:
            if block.get(kind) is not None:
                checks.append((("nuisances", dataset, kind), positive, block[kind]))
    for place, check, spec in checks:
        try:
            check(spec)
        except ValueError as error:
            yield place, f"{dotted(place)}: {' '.join(str(error).split())}"


def _doppler(settings: Mapping[str, Any]) -> None:
    from fogline.doppler import doppler_average, doppler_grid

    grid = doppler_grid(settings)
    doppler_average(settings if grid is None else grid.settings[0])
