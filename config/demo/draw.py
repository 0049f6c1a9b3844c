"""Draw the demo's constraint files: `python config/demo/draw.py [DIRECTORY]`.

The programme Saltmarsh is invented, and so is the universe that it observes: the numbers come from
the f(N, X, z) in `TRUTH` and nowhere else. Every file is predicted with fogline's own response in
the file's own convention and then drawn from the row's likelihood with a fixed seed, so that a fit
must recover `TRUTH` within its bands.
"""

from __future__ import annotations

import sys
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np
from astropy import units
from astropy.cosmology import units as cosmology_units
from astropy.table import Table

from fogline.cosmology import Cosmology
from fogline.datasets import DataSet, hypothetical
from fogline.distribution import ColumnDistribution
from fogline.likelihood import Likelihood
from fogline.quantities import Setting
from fogline.response import build_response
from fogline.tables import write_whole

SEED = 20260101

DISTRIBUTION = ColumnDistribution(
    reference_redshift=2.5,
    pivots=(12.0, 13.5, 15.0, 16.2, 17.5, 19.0, 20.3, 21.0, 21.6, 22.5),
    evolution_pivots=(14.0, 17.5, 20.3),
)
TRUTH = {
    "log_f": [-9.75, -11.85, -14.45, -16.6, -18.65, -20.35, -21.7, -22.7, -23.85, -26.6],
    "evolution": [1.8, 1.9, 0.4],
}
SETTING = Setting(DISTRIBUTION, Cosmology(70.0, 0.3), {"dist": "fixed", "b": 26.0})

RESULTS = {"H0": 70.0, "Om0": 0.3}
OTHER = {"H0": 72.0, "Om0": 0.27}


@dataclass(frozen=True)
class Survey:
    """One constraint file before anybody observed anything.

    ``relative`` holds the errors of both sides over the value (in dex for log f); ``digits`` are
    significant digits of the file; ``limits`` turns rows into limits: row → upper or lower;
    ``correlation`` is the length [Angstrom] over which errors are correlated.
    """

    name: str
    quantity: str
    note: str
    meta: dict[str, Any]
    z_lo: list[float]
    z_hi: list[float]
    relative: tuple[float, float] = (0.0, 0.0)
    unit: str = ""
    cosmology: dict[str, float] | None = None
    columns: tuple[list[float], list[float]] | None = None
    path: list[float] | None = None
    limits: dict[int, str] = field(default_factory=dict)
    wavelengths: tuple[list[float], list[float]] | None = None
    correlation: float | None = None
    decimals: int = 3


def single(*z: float) -> tuple[list[float], list[float]]:
    """Return equal bin ends: rows at single redshifts."""
    return list(z), list(z)


FOREST = np.round(np.arange(12.5, 15.51, 0.375), 3).tolist()
DAMPED = [20.3, 20.5, 20.7, 20.9, 21.1, 21.3, 21.5, 21.75, 22.0]

SURVEYS = (
    Survey(
        "lya_opacity",
        "lya_opacity",
        "Continuum-fitted spectra; absorbers thick at the Lyman limit removed.",
        {"form": "tau", "log_nhi_min": 12.0, "log_nhi_max": 17.2},
        *single(2.1, 2.4, 2.7, 3.0, 3.4, 3.8, 4.2, 4.5),
        relative=(0.05, 0.05),
        decimals=4,
    ),
    Survey(
        "lya_flux",
        "lya_opacity",
        "Stacked spectra in redshift bins; errors are asymmetric.",
        {"form": "mean_flux", "log_nhi_min": 12.0, "log_nhi_max": 17.2},
        [2.2, 2.6, 3.0, 3.5],
        [2.6, 3.0, 3.5, 4.0],
        relative=(0.02, 0.03),
        decimals=4,
    ),
    Survey(
        "lls_incidence",
        "lls_incidence",
        "Systems of optical depth two and above, per unit redshift.",
        {"per": "dz", "tau_min": 2.0},
        [2.0, 2.6, 3.2, 3.8],
        [2.6, 3.2, 3.8, 4.4],
        relative=(0.11, 0.13),
    ),
    Survey(
        "lls_counts",
        "lls_incidence",
        "Systems of optical depth one and above, below the sub-DLAs: numbers on a path.",
        {"per": "dX", "tau_min": 1.0, "log_nhi_max": 19.0},
        [2.2, 3.0, 3.6],
        [3.0, 3.6, 4.2],
        cosmology=OTHER,
        path=[120.0, 95.0, 60.0],
    ),
    Survey(
        "mean_free_path",
        "mean_free_path",
        "Opacity at 912 A fitted to composite spectra.",
        {"definition": "local", "frame": "proper"},
        *single(2.45, 3.1, 3.7, 4.2),
        relative=(0.09, 0.12),
        unit="Mpc",
        cosmology=RESULTS,
        decimals=2,
    ),
    Survey(
        "mean_free_path_unit_depth",
        "mean_free_path",
        "Distance at which the flux is attenuated by 1/e; too few spectra at the lowest redshift.",
        {"definition": "unit_depth", "frame": "comoving", "confidence": 0.95},
        *single(2.9, 3.9, 4.5),
        relative=(0.12, 0.15),
        unit="Mpc / littleh",
        cosmology=OTHER,
        limits={0: "lower"},
        decimals=1,
    ),
    Survey(
        "forest_columns",
        "column_distribution",
        "Voigt-profile fits of the forest; scatter includes the completeness correction.",
        {"per": "dX"},
        [2.3] * (len(FOREST) - 1),
        [2.7] * (len(FOREST) - 1),
        relative=(0.05, 0.05),
        cosmology={"H0": 70.0, "Om0": 0.26},
        columns=(FOREST[:-1], FOREST[1:]),
    ),
    Survey(
        "dla_columns",
        "column_distribution",
        "Damped absorbers counted in bins of column density.",
        {"per": "dX"},
        [2.3] * (len(DAMPED) - 1),
        [3.3] * (len(DAMPED) - 1),
        cosmology=RESULTS,
        columns=(DAMPED[:-1], DAMPED[1:]),
        path=[3000.0] * (len(DAMPED) - 1),
    ),
    Survey(
        "hi_density",
        "hi_density",
        "Gas in damped absorbers, helium included; the last bin holds too few for a measurement.",
        {"form": "omega_gas", "helium_factor": 1.3, "log_nhi_min": 20.3, "confidence": 0.95},
        [2.0, 2.6, 3.2, 4.0],
        [2.6, 3.2, 4.0, 4.6],
        relative=(0.16, 0.2),
        cosmology=OTHER,
        limits={3: "upper"},
        decimals=6,
    ),
    Survey(
        "lyb_opacity",
        "lyman_series_opacity",
        "Forest of Lyb, the Lya forest in front of it divided out.",
        {
            "line": "beta",
            "foreground": "removed",
            "form": "tau",
            "log_nhi_min": 12.0,
            "log_nhi_max": 17.2,
        },
        *single(2.8, 3.2, 3.7),
        relative=(0.1, 0.1),
        decimals=4,
    ),
    Survey(
        "composite_flux",
        "continuum_flux",
        "Stack of quasars below the Lyman limit, over its flux just above it; continuum errors "
        "are correlated.",
        {
            "lines": "included",
            "reference_wavelength": 920.0,
            "covariance": "covariance/composite_flux.ecsv",
        },
        *single(*[3.6] * 6),
        relative=(0.06, 0.06),
        wavelengths=(list(range(850, 910, 10)), list(range(860, 920, 10))),
        correlation=15.0,
        decimals=4,
    ),
)


def observe(survey: Survey, rng: np.random.Generator) -> Table:
    """Return one file's table, drawn from the truth."""
    expected = _blank(survey)
    response = build_response([expected], SETTING)
    truth = response.predict(np.array(TRUTH["log_f"] + TRUTH["evolution"]))
    scale = np.ones_like(truth) if _in_dex(survey) else truth
    lo, hi = (relative * scale for relative in survey.relative)
    filled = replace(expected, observed=truth, err_lo=lo, err_hi=hi)
    if survey.correlation is not None:
        filled = replace(filled, covariance=_correlations(survey) * np.outer(lo, lo))
    likelihood = Likelihood.from_datasets([filled])
    drawn = likelihood.replicate(truth[None], rng)[0]
    return _table(survey, drawn, np.round(lo, survey.decimals), np.round(hi, survey.decimals))


def _correlations(survey: Survey) -> np.ndarray:
    assert survey.wavelengths is not None
    assert survey.correlation is not None
    middle = np.mean(survey.wavelengths, axis=0)
    return np.round(np.exp(-np.abs(middle[:, None] - middle) / survey.correlation), 4)


def _correlation_table(survey: Survey) -> Table:
    """Return the upper triangle of a survey's correlations."""
    matrix = _correlations(survey)
    row, column = np.triu_indices(len(matrix), 1)
    return Table({"row": row, "column": column, "correlation": matrix[row, column]})


def _in_dex(survey: Survey) -> bool:
    return survey.quantity == "column_distribution"


def _blank(survey: Survey) -> DataSet:
    data = hypothetical(survey.quantity, survey.z_lo, unit=survey.unit, **survey.meta)
    filled: dict[str, Any] = {"z_hi": np.array(survey.z_hi)}
    if survey.cosmology is not None:
        filled["cosmology"] = Cosmology(**survey.cosmology)
    if survey.columns is not None:
        filled["log_nhi_lo"], filled["log_nhi_hi"] = map(np.array, survey.columns)
    if survey.wavelengths is not None:
        lo, hi = (np.array(edge, dtype=float) for edge in survey.wavelengths)
        filled |= {"wavelength_lo": lo, "wavelength_hi": hi}
    if survey.path is not None:
        filled |= {"search_path": np.array(survey.path), "counts": True}
    return replace(data, **filled)


def _table(survey: Survey, drawn: np.ndarray, lo: np.ndarray, hi: np.ndarray) -> Table:
    table = Table()
    if survey.z_lo == survey.z_hi:
        table["z"] = survey.z_lo
    else:
        table["z_lo"], table["z_hi"] = survey.z_lo, survey.z_hi
    if survey.columns is not None:
        table["log_nhi_lo"], table["log_nhi_hi"] = survey.columns
    if survey.wavelengths is not None:
        for name, edge in zip(("wavelength_lo", "wavelength_hi"), survey.wavelengths, strict=True):
            table[name] = np.array(edge, dtype=float) * units.Angstrom
    if survey.path is not None:
        table["count"], table["path"] = drawn.astype(int), survey.path
    else:
        _add_measurements(table, survey, drawn, lo, hi)
    table.meta = {
        "quantity": survey.quantity,
        "source": "Saltmarsh programme, an invented survey (config/demo/draw.py)",
        "note": survey.note,
        **survey.meta,
    }
    if survey.cosmology is not None:
        table.meta["cosmology"] = survey.cosmology
    return table


def _add_measurements(
    table: Table, survey: Survey, drawn: np.ndarray, lo: np.ndarray, hi: np.ndarray
) -> None:
    # A limit at 95%: the measurement plus (upper) or minus (lower) 1.645 of its errors.
    sign = np.zeros(len(drawn))
    for row, side in survey.limits.items():
        sign[row] = {"upper": 1.0, "lower": -1.0}[side]
    value = drawn + 1.645 * sign * np.where(sign < 0, lo, hi)
    name = "log_f" if _in_dex(survey) else "value"
    table[name] = np.round(value, survey.decimals)
    if survey.unit:
        with units.add_enabled_units(cosmology_units):
            table[name].unit = units.Unit(survey.unit)
    if survey.relative[0] == survey.relative[1]:
        table["err"] = lo
    else:
        table["err_lo"], table["err_hi"] = lo, hi
    if survey.limits:
        table["limit"] = [survey.limits.get(i, "") for i in range(len(drawn))]
    for column in ("err", "err_lo", "err_hi"):
        if column in table.colnames:
            table[column].unit = table[name].unit


def main(directory: str | Path = Path(__file__).parent) -> None:
    """Write every file of the demo."""
    streams = np.random.SeedSequence(SEED).spawn(len(SURVEYS))
    for survey, stream in zip(SURVEYS, streams, strict=True):
        write(observe(survey, np.random.default_rng(stream)), directory, f"{survey.name}.ecsv")
        if survey.correlation is not None:
            write(_correlation_table(survey), directory, survey.meta["covariance"])

    path, absorbers = damped_list(np.random.default_rng(np.random.SeedSequence(SEED + 1)))
    write(path, directory, "paths/dla_sightlines.ecsv")
    write(absorbers, directory, "dla_list.ecsv")
    write(filter_curve(), directory, "filters/saltmarsh_u.ecsv")
    write(background(), directory, "background/photoionization_rate.ecsv")


def damped_list(rng: np.random.Generator) -> tuple[Table, Table]:
    """Return the path and the absorbers of a survey of single damped systems at z > 3.3.

    True columns are drawn from the truth above 10^19.6, get errors, and are kept where the
    *measured* column is that of a damped system: weak ones scatter in, strong ones out.
    """
    n_sightlines = 700
    z_start = rng.uniform(3.3, 3.9, n_sightlines)
    z_end = z_start + rng.uniform(0.2, 0.7, n_sightlines)
    theta = np.array(TRUTH["log_f"] + TRUTH["evolution"])
    log_edges, z_edges = np.linspace(19.6, 22.5, 581), np.linspace(3.3, 4.6, 131)
    log_nhi, z = (0.5 * (edges[1:] + edges[:-1]) for edges in (log_edges, z_edges))
    f = 10.0 ** np.array([DISTRIBUTION.log_f(theta, log_nhi, x) for x in z])
    per_z = f * np.diff(10.0**log_edges) * SETTING.cosmology.dx_dz(z)[:, None]
    covered = ((z[:, None] > z_start) & (z[:, None] < z_end)).sum(axis=1)
    expected = per_z * covered[:, None] * (z_edges[1] - z_edges[0])
    n_drawn = rng.poisson(expected.sum())
    cell = np.searchsorted(np.cumsum(expected) / expected.sum(), rng.random(n_drawn))
    jitter = rng.random((2, n_drawn)) - 0.5
    true = log_nhi[cell % len(log_nhi)] + jitter[0] * (log_edges[1] - log_edges[0])
    redshift = z[cell // len(log_nhi)] + jitter[1] * (z_edges[1] - z_edges[0])
    error = np.where(rng.random(n_drawn) < 0.7, 0.10, 0.15)
    measured = np.round(true + error * rng.standard_normal(n_drawn), 2)
    kept = np.flatnonzero(measured >= 20.3)
    kept = kept[np.argsort(redshift[kept])]
    path = Table({"z_start": np.round(z_start, 4), "z_end": np.round(z_end, 4)})
    path.meta = {"kind": "sightlines", "source": "Saltmarsh programme, invented"}
    absorbers = Table({"z": np.round(redshift, 4), "log_nhi": measured, "err": error})[kept]
    absorbers.meta = {
        "quantity": "absorber_list",
        "source": "Saltmarsh programme, an invented survey (config/demo/draw.py)",
        "note": "Damped absorbers one by one, at redshifts above those of dla_columns.",
        "survey_path": "paths/dla_sightlines.ecsv",
        "log_nhi_min": 20.3,
    }
    return path, absorbers


def filter_curve() -> Table:
    """Return the throughput of the programme's blue filter, which is invented as well."""
    table = Table()
    table["wavelength"] = np.array([3250.0, 3400.0, 3600.0, 3800.0, 3950.0]) * units.Angstrom
    table["throughput"] = [0.0, 0.62, 0.71, 0.66, 0.0]
    table.meta = {"kind": "filter", "source": "Saltmarsh programme, invented"}
    return table


def background() -> Table:
    """Return a photoionization rate, as invented as the rest."""
    table = Table()
    table["z"] = [2.2, 2.8, 3.4, 4.0, 4.6]
    table["value"] = np.array([1.1e-12, 9.5e-13, 8.0e-13, 7.5e-13, 7.0e-13]) / units.s
    table["err"] = np.array([2.5e-13, 2.0e-13, 2.0e-13, 2.0e-13, 2.5e-13]) / units.s
    table.meta = {"kind": "photoionization_rate", "source": "Saltmarsh programme, invented"}
    return table


def write(table: Table, directory: str | Path, name: str) -> None:
    """Write one file of the demo, whole or not at all."""
    write_whole(
        Path(directory) / name,
        lambda path: table.write(path, format="ascii.ecsv", overwrite=True),
    )


if __name__ == "__main__":
    main(*sys.argv[1:])
