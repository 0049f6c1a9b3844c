"""Distributions by name and arguments, as a config states them: ``{dist: norm, loc: 0, scale: 1}``.

The names and arguments are those of the continuous distributions of `scipy.stats`.
"""

from __future__ import annotations

import difflib
import inspect
import math
from collections.abc import Mapping, Sequence
from numbers import Real
from typing import Any

import numpy as np
from scipy import stats

from fogline.faults import nearest


def frozen(spec: Mapping[str, Any]) -> Any:
    """Return the scipy distribution that a config names.

    Parameters
    ----------
    spec : mapping
        ``dist``, the name of a continuous distribution of `scipy.stats`, its shape parameters
        and, where wanted, ``loc`` and ``scale``.

    Returns
    -------
    scipy.stats.rv_frozen

    Raises
    ------
    ValueError
        Where the name or an argument is not known, an argument is missing or not a number, or the
        distribution does not exist for these arguments. Names what is near or allowed.
    """
    name = distribution_name(spec, continuous_names())
    arguments = {key: value for key, value in spec.items() if key != "dist"}
    family = getattr(stats, name)
    shapes = [word.strip() for word in family.shapes.split(",")] if family.shapes else []
    check_arguments(name, arguments, required=shapes, optional=["loc", "scale"])
    distribution = family(**arguments)
    if np.any(np.isnan(distribution.support())):  # how scipy marks arguments it cannot use
        raise ValueError(f"distribution {name!r} does not exist for {arguments}")
    return distribution


def positive(spec: Mapping[str, Any]) -> Any:
    """Return the scipy distribution that a config names, if it reaches positive values.

    Parameters
    ----------
    spec : mapping
        As `frozen` takes it.

    Raises
    ------
    ValueError
        As `frozen` does, or where it does not.
    """
    distribution = frozen(spec)
    if not distribution.sf(0.0) > 0.0:
        raise ValueError(f"distribution must reach positive values, not so {dict(spec)}")
    return distribution


def continuous_names() -> list[str]:
    """Return the names of all continuous distributions of `scipy.stats`, sorted."""
    return sorted(name for name, _ in inspect.getmembers(stats, _is_continuous))


def distribution_name(spec: Mapping[str, Any], known: Sequence[str]) -> str:
    """Return the name under ``dist`` if it is known.

    Parameters
    ----------
    spec : mapping
        As `frozen` takes it.
    known : sequence of str
        Names that are allowed.

    Returns
    -------
    str

    Raises
    ------
    ValueError
        Where ``dist`` is missing or not known; names the nearest known one.
    """
    if "dist" not in spec:
        raise ValueError(f"a distribution needs the key 'dist', got {dict(spec)}")
    name = str(spec["dist"])
    if name not in known:
        near = difflib.get_close_matches(name, known, n=1, cutoff=0.6)
        # All hundred names would drown the message.
        hint = f"did you mean '{near[0]}'?" if near else "allowed: those of scipy.stats"
        raise ValueError(f"unknown distribution {name!r}; {hint}")
    return name


def check_arguments(
    name: str, arguments: Mapping[str, Any], required: list[str], optional: list[str]
) -> None:
    """Refuse arguments that are unknown, missing or not finite numbers.

    Parameters
    ----------
    name : str
        Of the distribution, for the message.
    arguments : mapping
        What was given.
    required, optional : list of str
        What is allowed.

    Raises
    ------
    ValueError
        Names the first fault and what is allowed.
    """
    for key, value in arguments.items():
        if key not in required + optional:
            hint = nearest(str(key), required + optional)
            raise ValueError(f"distribution {name!r} has no argument {key!r}; {hint}")
        number = isinstance(value, Real) and not isinstance(value, bool)
        if not number or not math.isfinite(value):
            raise ValueError(f"{key} of distribution {name!r} must be a number, got {value!r}")
    missing = [key for key in required if key not in arguments]
    if missing:
        raise ValueError(f"distribution {name!r} needs {', '.join(missing)}")


def _is_continuous(member: object) -> bool:
    return isinstance(member, stats.rv_continuous)
