"""Blocks of a config laid over each other: the top, a chain of ``base``s, the analysis itself.

Mappings merge key by key, everything else replaces. A mapping that states ``dist`` replaces a
distribution as a whole, since the arguments of one distribution mean nothing to another.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

from fogline.yaml_lines import Place

BLOCKS: Final = ("cosmology", "model", "nuisances", "sampler", "derive", "checks", "forecasts")
"""Blocks that an analysis may override."""

_BESIDE_DISTRIBUTION: Final = ("log_nhi",)  # not an argument: says where the distribution stands


@dataclass(frozen=True)
class Layers:
    """Blocks over blocks.

    Parameters
    ----------
    layers : tuple of (tuple, mapping)
        Where in the config each layer stands, and what it holds; later ones win.
    """

    layers: tuple[tuple[Place, Mapping[str, Any]], ...]

    def merged(self) -> dict[str, Any]:
        """Return the blocks as they hold for the analysis."""
        result: dict[str, Any] = {}
        for _, layer in self.layers:
            result = merge(result, {key: layer[key] for key in BLOCKS if key in layer})
        return result

    def origin(self, place: Place) -> Place:
        """Return where in the config the value at a place of the merged blocks comes from."""
        for n in range(len(place), 0, -1):
            for start, layer in reversed(self.layers):
                if _holds(layer, place[:n]):
                    return (*start, *place[:n])
        return self.layers[-1][0]


def merge(below: Any, above: Any) -> Any:
    """Return one value laid over another.

    Parameters
    ----------
    below, above : Any
        Mappings are merged; anything else from `above` replaces what is below.

    Returns
    -------
    Any
        Shares no mapping with the arguments.
    """
    if not isinstance(above, Mapping):
        return above
    base = dict(below) if isinstance(below, Mapping) else {}
    if "dist" in above:
        base = {key: base[key] for key in _BESIDE_DISTRIBUTION if key in base}
    return {**base, **{key: merge(base.get(key), above[key]) for key in above}}


def _holds(layer: Any, place: Place) -> bool:
    for key in place:
        if isinstance(layer, Mapping) and key in layer:
            layer = layer[key]
        elif isinstance(layer, list) and isinstance(key, int) and key < len(layer):
            layer = layer[key]
        else:
            return False
    return True
