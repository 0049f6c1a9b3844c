"""Checks on the merged blocks of one analysis that a schema cannot express."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from typing import Any

from fogline.config_schema import PlacedFault
from fogline.cosmology_keys import cosmology_faults
from fogline.settings import Study
from fogline.yaml_lines import Place, dotted

_MOST_REDSHIFTS = 10_000


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
    yield from _prior_faults(model)


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
    sampler, model = blocks["sampler"], blocks["model"]
    n = len(model["pivots"]) + len(model["evolution"]["pivots"])
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
    from fogline.distributions import frozen
    from fogline.doppler import doppler_average

    model = study.analyses[name].model
    priors = model.evolution.priors
    # One distribution for all pivots is one fault, not one for each of them.
    same = all(prior == priors[0] for prior in priors)
    evolution = [((), priors[0])] if same else [((i,), prior) for i, prior in enumerate(priors)]
    checks: list[tuple[Place, Callable[[Any], Any], Any]] = [
        (("model", "doppler"), doppler_average, model.doppler),
        (("model", "prior", "anchor"), frozen, model.prior.anchor),
        (("model", "prior", "slope", "first"), _positive, model.prior.first_slope),
        *((("model", "evolution", "prior", *i), frozen, prior) for i, prior in evolution),
    ]
    if model.prior.slope_step is not None:
        checks.append((("model", "prior", "slope", "step"), frozen, model.prior.slope_step))
    for place, check, spec in checks:
        try:
            check(spec)
        except ValueError as error:
            yield place, f"{dotted(place)}: {' '.join(str(error).split())}"


def _positive(spec: Mapping[str, Any]) -> None:
    from fogline.distributions import frozen

    if not frozen(spec).sf(0.0) > 0.0:
        raise ValueError("distribution of a slope must reach positive values")
