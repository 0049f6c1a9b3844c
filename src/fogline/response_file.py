"""The response of one analysis as an HDF5 file, with everything that later stages need.

The file holds the data sets as read, points, weights and constants of every block, the settings of
the analysis, and the fingerprint: a hash of data, model, cosmology and the code that made it.
Chains carry the same fingerprint, so that a stale one is never continued.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass, fields, replace
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.distribution import ColumnDistribution
from fogline.nuisances import nuisances_of
from fogline.posterior import Posterior
from fogline.priors import Prior
from fogline.provenance import code_hash, file_hash, settings_hash, to_json, version
from fogline.quantities import Block, Setting
from fogline.response import Response, build_response
from fogline.settings import AnalysisSettings, analysis_from_plain
from fogline.tables import write_whole

ARRAYS = (
    "z_lo",
    "z_hi",
    "observed",
    "err_lo",
    "err_hi",
    "limit",
    "search_path",
    "log_nhi_lo",
    "log_nhi_hi",
)
"""Fields of `DataSet` that are arrays over rows."""

OPTIONAL_ARRAYS = ("covariance", "wavelength_lo", "wavelength_hi", "role")
"""Fields of `DataSet` that are arrays or None."""


@dataclass(frozen=True)
class Fit:
    """An analysis ready to be sampled: response, settings and what made them.

    Parameters
    ----------
    analysis : AnalysisSettings
    response : Response
    provenance : mapping
        ``fogline_version``, ``fingerprint``, ``inputs`` (hash by file), for every output's meta.
    """

    analysis: AnalysisSettings
    response: Response
    provenance: Mapping[str, Any]

    @property
    def setting(self) -> Setting:
        """Model and cosmology of the results."""
        return setting_of(self.analysis)

    @property
    def posterior(self) -> Posterior:
        """Posterior of the analysis."""
        return Posterior.of(self.response, self.prior)

    @property
    def prior(self) -> Prior:
        """Prior of all parameters, nuisance parameters included."""
        return Prior(self.analysis.model, nuisances_of(self.response.datasets))

    @property
    def fingerprint(self) -> str:
        """Hash of data, model, cosmology and code."""
        return str(self.provenance["fingerprint"])

    def table_meta(self) -> dict[str, Any]:
        """Return the provenance that every table carries."""
        return {
            "analysis": self.analysis.name,
            **self.provenance,
            "cosmology": asdict(self.analysis.cosmology),
            "config": to_json(self.analysis),
        }


def setting_of(analysis: AnalysisSettings) -> Setting:
    """Return the model and cosmology that an analysis describes."""
    return Setting(
        ColumnDistribution.from_settings(analysis.model),
        Cosmology(**asdict(analysis.cosmology)),
        analysis.model.doppler,
    )


def build_fit(analysis: AnalysisSettings, datasets: list[DataSet]) -> Fit:
    """Compute the response of an analysis.

    Parameters
    ----------
    analysis : AnalysisSettings
    datasets : list of DataSet
        Validated; their files still exist and are hashed.
    """
    paths = [path for data in datasets for path in (data.path, *data.linked)]
    inputs = {path: file_hash(path) for path in paths}
    fingerprint = settings_hash(
        sorted(inputs.items()),
        analysis.model,
        analysis.cosmology,
        analysis.nuisances,
        code_hash("fogline.posterior"),
    )
    provenance = {"fogline_version": version(), "fingerprint": fingerprint, "inputs": inputs}
    return Fit(analysis, build_response(datasets, setting_of(analysis)), provenance)


def save_fit(fit: Fit, path: str | Path) -> None:
    """Write a fit's response, whole or not at all."""
    write_whole(path, lambda temporary: _write(fit, temporary))


def _write(fit: Fit, path: Path) -> None:
    with h5py.File(path, "w") as file:
        file.attrs["analysis"] = to_json(fit.analysis)
        file.attrs["provenance"] = to_json(fit.provenance)
        for i, (data, block) in enumerate(
            zip(fit.response.datasets, fit.response.blocks, strict=True)
        ):
            group = file.create_group(f"datasets/{i:03d}")
            arrays = (*ARRAYS, *OPTIONAL_ARRAYS)
            others = [f.name for f in fields(data) if f.name not in (*arrays, "extras")]
            scalars = {name: getattr(data, name) for name in others}
            scalars["cosmology"] = _plain_cosmology(data.cosmology)
            group.attrs["dataset"] = to_json(scalars)
            for name in arrays:
                if getattr(data, name) is not None:
                    group[f"rows/{name}"] = getattr(data, name)
            for name in ("log_nhi", "z", "weights"):
                group[f"block/{name}"] = getattr(block, name)
            group["block"].attrs["n_doppler"] = block.n_doppler
            for name, values in data.extras.items():
                group[f"extras/{name}"] = values
            for name, values in block.constants.items():
                group[f"constants/{name}"] = values


def _plain_cosmology(cosmology: Cosmology | None) -> dict[str, Any] | None:
    if cosmology is None:
        return None
    return {"H0": cosmology.H0, "Om0": cosmology.Om0, "Ode0": cosmology.Ode0}


def load_fit(path: str | Path, analysis: AnalysisSettings | None = None) -> Fit:
    """Read a fit that `save_fit` wrote.

    Parameters
    ----------
    path : path-like
    analysis : AnalysisSettings, optional
        Settings to go on with where sampler, derived grids or forecasts changed since; those of
        the file by default. Model, cosmology and data sets are those of the file in any case.
    """
    with h5py.File(path, "r") as file:
        stored = analysis_from_plain(json.loads(file.attrs["analysis"]))
        provenance = json.loads(file.attrs["provenance"])
        groups = [file["datasets"][name] for name in sorted(file["datasets"])]
        datasets = tuple(_read_dataset(group) for group in groups)
        blocks = tuple(_read_block(group) for group in groups)
    if analysis is not None:
        stored = replace(
            stored,
            sampler=analysis.sampler,
            derive=analysis.derive,
            checks=analysis.checks,
            forecasts=analysis.forecasts,
        )
    setting = setting_of(stored)
    response = Response(setting.distribution, datasets, blocks, setting.doppler_grid)
    return Fit(stored, response, provenance)


def _read_dataset(group: h5py.Group) -> DataSet:
    scalars = json.loads(group.attrs["dataset"])
    cosmology = scalars.pop("cosmology")
    for name in ("labels", "lines", "linked"):
        scalars[name] = tuple(scalars[name])
    present = [name for name in (*ARRAYS, *OPTIONAL_ARRAYS) if name in group["rows"]]
    rows = {name: group[f"rows/{name}"][()] for name in present}
    extras = {name: values[()] for name, values in group.get("extras", {}).items()}
    return DataSet(
        **scalars, **rows, extras=extras, cosmology=Cosmology(**cosmology) if cosmology else None
    )


def _read_block(group: h5py.Group) -> Block:
    arrays = {name: np.asarray(group[f"block/{name}"][()]) for name in ("log_nhi", "z", "weights")}
    constants = group.get("constants", {})
    n_doppler = int(group["block"].attrs["n_doppler"])
    return Block(
        **arrays, constants={name: constants[name][()] for name in constants}, n_doppler=n_doppler
    )
