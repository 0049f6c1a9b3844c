"""Merged, valid blocks of a config turned into frozen settings."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, Final

from fogline.settings import (
    AnalysisSettings,
    CalibrationSettings,
    CandidateSettings,
    ChecksSettings,
    CosmologySettings,
    DeriveSettings,
    EvolutionSettings,
    HighColumnSettings,
    ModelSettings,
    SamplerSettings,
    SplinePriorSettings,
)

HIGH_COLUMN_PRIORS: Final[Mapping[str, Mapping[str, Any]]] = {
    "gamma": {
        "slope": {"dist": "norm", "loc": 1.5, "scale": 0.5},
        "log_nc": {"dist": "norm", "loc": 21.3, "scale": 0.5},
    },
    "double_power_law": {
        "slope": {"dist": "norm", "loc": 2.0, "scale": 0.5},
        "steep": {"dist": "norm", "loc": 3.5, "scale": 1.0},
        "log_nb": {"dist": "norm", "loc": 21.5, "scale": 0.3},
    },
    "discs": {"log_n0": {"dist": "norm", "loc": 21.3, "scale": 0.5}},
}
"""Parameters of every form of high columns, in order, and their default priors."""

_ANCHOR_NEAR: Final = 20.3  # where the DLA counts of most studies begin and f is known best


def analysis_settings(
    name: str, files: tuple[str, ...], blocks: Mapping[str, Any]
) -> AnalysisSettings:
    """Return the settings of one analysis.

    Parameters
    ----------
    name : str
        The analysis.
    files : tuple of str
        Its constraint files.
    blocks : mapping
        Merged, valid, with defaults.

    Returns
    -------
    AnalysisSettings
    """
    cosmology, derive, sampler = blocks["cosmology"], blocks["derive"], blocks["sampler"]
    dark = cosmology["Ode0"]
    whole = ("walkers", "ensembles", "seed", "target_ess", "max_steps", "thin")
    return AnalysisSettings(
        name=name,
        datasets=files,
        cosmology=CosmologySettings(
            float(cosmology["H0"]), float(cosmology["Om0"]), None if dark is None else float(dark)
        ),
        model=_model(blocks["model"]),
        sampler=SamplerSettings(
            **{key: int(sampler[key]) for key in whole},
            max_rhat=float(sampler["max_rhat"]),
            warm_up=tuple(int(n) for n in sampler["warm_up"]),
            components=tuple(int(n) for n in sampler["components"]),
            independence_share=float(sampler["independence_share"]),
        ),
        derive=DeriveSettings(
            redshifts=redshift_grid(derive["redshifts"]),
            column_redshifts=redshift_grid(derive["column_redshifts"]),
            draws=int(derive["draws"]),
            source_redshifts=tuple(map(float, derive["source_redshifts"])),
            rest_wavelengths=redshift_grid(derive["rest_wavelengths"]),
            sightlines=int(derive["sightlines"]),
            filters=tuple(derive["filters"]),
            opacity_wavelengths=tuple(map(float, derive["opacity_wavelengths"])),
            background=dict(derive["background"]),
            helium_factor=float(derive["helium_factor"]),
            dust=None if derive["dust"] is None else dict(derive["dust"]),
        ),
        nuisances=blocks["nuisances"],
        checks=_checks(blocks["checks"]),
        forecasts=tuple(
            _candidate(key, candidate)
            for key, candidate in blocks["forecasts"].items()
            if candidate is not None
        ),
    )


def _checks(block: Mapping[str, Any]) -> ChecksSettings:
    calibration = block["calibration"]
    whole = ("replicates", "batch", "draws")
    return ChecksSettings(
        false_alarm=float(block["false_alarm"]),
        groups={name: tuple(group) for name, group in block["groups"].items()},
        calibration=CalibrationSettings(
            **{key: int(calibration[key]) for key in whole}, modes=tuple(calibration["modes"])
        ),
        nested=bool(block["nested"]),
    )


def _candidate(name: str, block: Mapping[str, Any]) -> CandidateSettings:
    return CandidateSettings(
        name=name,
        quantity=block["quantity"],
        meta=dict(block.get("meta") or {}),
        unit=block.get("unit") or "",
        rows=tuple(dict(row) for row in block["rows"]),
    )


def _model(model: Mapping[str, Any]) -> ModelSettings:
    pivots = tuple(float(pivot) for pivot in model["pivots"])
    evolution, anchor, slope = model["evolution"], model["prior"]["anchor"], model["prior"]["slope"]
    n = len(evolution["pivots"])
    priors = (
        evolution["prior"] if isinstance(evolution["prior"], list) else [evolution["prior"]] * n
    )
    at = anchor.get("log_nhi")
    at = min(pivots, key=lambda pivot: abs(pivot - _ANCHOR_NEAR)) if at is None else float(at)
    walk = slope["kind"] == "walk"
    high = _high_column(model["high_column"], pivots[-1])
    if high is not None:
        pivots = tuple(pivot for pivot in pivots if pivot <= float(model["high_column"]["above"]))
    return ModelSettings(
        reference_redshift=float(model["reference_redshift"]),
        pivots=pivots,
        evolution=EvolutionSettings(
            tuple(map(float, evolution["pivots"])),
            tuple(priors),
            tuple(map(float, evolution["breaks"])),
        ),
        prior=SplinePriorSettings(
            anchor_log_nhi=at,
            anchor={key: item for key, item in anchor.items() if key != "log_nhi"},
            slope_kind=slope["kind"],
            first_slope=slope["first"],
            slope_step=slope["step"] if walk else None,
        ),
        doppler=model["doppler"],
        high_column=high,
    )


def _high_column(block: Mapping[str, Any] | None, top: float) -> HighColumnSettings | None:
    if block is None:
        return None
    form = block["form"]
    priors = {**HIGH_COLUMN_PRIORS[form], **block["prior"]}
    return HighColumnSettings(form, top, tuple(priors.values()))


def redshift_grid(grid: Mapping[str, float] | Sequence[float]) -> tuple[float, ...]:
    """Return the redshifts that ``{start, stop, step}`` or a list names.

    Parameters
    ----------
    grid : mapping or sequence
        As in the config.

    Returns
    -------
    tuple of float
        With `stop` where a step ends there.
    """
    if not isinstance(grid, Mapping):
        return tuple(float(z) for z in grid)
    n_steps = int((grid["stop"] - grid["start"]) / grid["step"] + 1e-9)
    return tuple(round(grid["start"] + i * grid["step"], 10) for i in range(n_steps + 1))
