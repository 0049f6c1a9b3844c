"""Files for other programs: samples of f(N, z), transmission curves, opacities, a LaTeX table.

Every file carries units in its columns and definitions in its header.
"""

from __future__ import annotations

import warnings
from collections.abc import Mapping
from pathlib import Path
from typing import Any, Final

import numpy as np
from astropy.io import fits
from astropy.table import Table
from numpy.typing import NDArray

from fogline.atomic import LYMAN_LIMIT
from fogline.derived import DERIVED_TABLES, Draws
from fogline.local_sources import opacity_block
from fogline.tables import bands, write_table, write_whole

Array = NDArray[np.float64]

SAMPLES: Final = 100
"""Posterior samples of f in the export."""

ENERGY_RATIOS: Final = np.geomspace(1.0, 4.0, 25)
"""Frequencies of the opacity grid, over that of the Lyman limit: up to that of He II."""


def write_exports(
    draws: Draws, parameters: Table, directory: str | Path, meta: Mapping[str, Any]
) -> None:
    """Write every export of an analysis.

    Parameters
    ----------
    draws : Draws
    parameters : astropy.table.Table
        The table of parameters.
    directory : path-like
    meta : mapping
        Provenance for the headers.
    """
    directory = Path(directory)
    samples = column_distribution_samples(draws)
    write_table(samples, directory / "column_distribution_samples.ecsv", **meta)
    write_fits(samples, directory / "column_distribution_samples.fits", meta)
    write_table(transmission_curves(draws), directory / "transmission.ecsv", **meta)
    write_table(opacity_grid(draws), directory / "opacity_grid.ecsv", **meta)
    text = latex_table(parameters, str(meta["analysis"]))
    write_whole(
        directory / "parameters.tex",
        lambda temporary: temporary.write_text(text, encoding="utf-8"),
    )


def column_distribution_samples(draws: Draws) -> Table:
    """Return log10 f on a grid of column and redshift: median and posterior samples."""
    z, log_nhi = draws.column_keys()
    log_f = np.log10(draws.f(log_nhi, z))
    chosen = np.linspace(0, len(log_f) - 1, min(SAMPLES, len(log_f))).astype(int)
    table = Table()
    table["z"], table["log_nhi"] = z, log_nhi
    table["median"] = np.median(log_f, axis=0)
    table["sample"] = log_f[chosen].T
    table["z"].description = "redshift"
    table["log_nhi"].description = "log10 of the column density in cm^-2"
    table["median"].description = "posterior median of log10 f(N_HI, X), f in cm^2"
    table["sample"].description = f"{len(chosen)} posterior samples of the same"
    table.meta["definition"] = (
        "log10 of f(N_HI, X, z) in cm^2: absorbers per unit column density and unit absorption "
        "distance X, dX/dz = H0 (1+z)^2 / H(z) in the cosmology of the config."
    )
    return table


def write_fits(table: Table, path: Path, meta: Mapping[str, Any]) -> None:
    """Write a table as a FITS binary table; long header texts become comments."""
    out = Table(table, copy=True)
    notes = {**table.meta, **meta}
    out.meta = {}
    hdu = fits.BinTableHDU(out)
    for i, name in enumerate(out.colnames, start=1):
        hdu.header[f"TTYPE{i}"] = (name, (table[name].description or "")[:46])
    for key, value in notes.items():
        hdu.header["HISTORY"] = f"{key}: {value}".replace("\n", " ")
    # A fixed content gives a fixed file.
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", fits.verify.VerifyWarning)
        write_whole(path, lambda temporary: hdu.writeto(temporary, overwrite=True))


def transmission_curves(draws: Draws) -> Table:
    """Return the mean transmission against rest wavelength, one column a source."""
    table = DERIVED_TABLES["transmission"]
    total = np.median(table.curves(draws)["total"].values, axis=0)
    rest = np.array(draws.derive.rest_wavelengths)
    out = Table()
    out["rest_wavelength"] = rest
    out["rest_wavelength"].unit = "Angstrom"
    curves = total.reshape(len(draws.derive.source_redshifts), len(rest))
    for z, curve in zip(draws.derive.source_redshifts, curves, strict=True):
        out[f"z{z:g}"] = curve
        out[f"z{z:g}"].description = f"mean transmission towards a source at z = {z:g} (median)"
    out.meta["definition"] = table.definition
    return out


def opacity_grid(draws: Draws) -> Table:
    """Return κ(z, λ) for radiative-transfer codes: the inverse proper free path, with bands."""
    rows = [
        bands(draws.integrate(opacity_block(float(z), ENERGY_RATIOS, draws.setting)))
        for z in draws.z
    ]
    out = Table()
    out["z"] = np.repeat(draws.z, len(ENERGY_RATIOS))
    out["wavelength"] = np.tile(LYMAN_LIMIT / ENERGY_RATIOS, len(draws.z))
    out["wavelength"].unit = "Angstrom"
    for name in rows[0]:
        out[f"kappa_{name}"] = np.concatenate([row[name] for row in rows])
        out[f"kappa_{name}"].unit = "1 / Mpc"
    out.meta["definition"] = (
        "kappa: effective opacity of clumped H I per proper Mpc at an absorber's redshift and "
        "rest wavelength, dtau/dl = (dX/dz) (1+z) H/c times the integral of f [1 - exp(-N sigma)] "
        "dN over all pivots; no redshifting of photons, no helium."
    )
    return out


def latex_table(parameters: Table, analysis: str) -> str:
    """Return the parameters as a LaTeX tabular with 68% errors."""
    lines = [
        f"% Parameters of the analysis {analysis}: posterior median and central 68%.",
        r"\begin{tabular}{lr}",
        r"\hline",
        r"Parameter & Value \\",
        r"\hline",
    ]
    for row in parameters:
        up, down = row["hi68"] - row["median"], row["median"] - row["lo68"]
        digits = max(0, 1 - int(np.floor(np.log10(max(min(up, down), 1e-9)))))
        value = f"{row['median']:.{digits}f}^{{+{up:.{digits}f}}}_{{-{down:.{digits}f}}}"
        lines.append(rf"{_latex_name(str(row['name']))} & ${value}$ \\")
    return "\n".join([*lines, r"\hline", r"\end{tabular}", ""])


def _latex_name(name: str) -> str:
    kind, _, of = name.rstrip("]").partition("[")
    if kind == "log_f":
        return rf"$\log f(10^{{{of}}}\,\mathrm{{cm}}^{{-2}})$"
    if kind == "evolution":
        pivot, _, segment = of.partition(", ")
        beside = rf",\ {segment.replace('<', ' < ').replace('>', ' > ')}" if segment else ""
        return rf"$\gamma({pivot}{beside})$"
    return (f"{kind} {of}").replace("_", r"\_")
