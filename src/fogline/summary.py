"""What a person reads first of an analysis, as plain values made from its result files.

The verdict of five lines is that of `fogline.summary_verdict`; pages are made by
`fogline.summary_page`. Nothing is computed here that does not stand in a table: quantities are
picked at the redshifts nearest to `fogline.headlines.REDSHIFTS`, and marked where they lie outside
the redshifts of the data or where the prior makes them.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

import numpy as np
from astropy.table import Table

from fogline.derived.base import DLA_LOG_NHI, LLS_LOG_NHI
from fogline.headlines import REDSHIFTS
from fogline.rounding import Rounded, rounded
from fogline.summary_figures import Figure, figures_of
from fogline.summary_verdict import Evidence, Line, Step, is_flagged, next_steps, verdict_lines
from fogline.tables import read_table

TABLES: Final = (
    "predictive",
    "discrepancies",
    "information",
    "information_by_column",
    "constraints",
    "hi_density",
    "mean_free_path",
    "incidence",
    "lya_opacity",
)
"""Tables that a summary needs; ``tension`` is taken where it exists."""


@dataclass(frozen=True)
class Source:
    """Where a main number stands, and what it is.

    Parameters
    ----------
    symbol : str
    table, curve : str
        Derived table, and prefix of its band columns.
    unit : str
        As printed; the table states the same in astropy's form.
    definition : str
    headline : str
        Its name in the table ``information``; empty where it is not listed there.
    """

    symbol: str
    table: str
    curve: str
    unit: str
    definition: str
    headline: str


SOURCES: Final = (
    Source(
        "ρ_HI",
        "hi_density",
        "rho_hi",
        "M☉ Mpc⁻³",
        "comoving mass density of H I between the outermost pivots, no helium",
        "rho_hi",
    ),
    Source(
        "Ω_HI",
        "hi_density",
        "omega_hi",
        "",
        "ρ_HI over the critical density of today, no helium",
        "rho_hi",
    ),
    Source(
        "local mean free path",
        "mean_free_path",
        "local",
        "proper Mpc",
        "from the opacity at 912 Å at that redshift, no redshifting",
        "mean_free_path_local",
    ),
    Source(
        "unit-depth mean free path",
        "mean_free_path",
        "unit_depth",
        "proper Mpc",
        "distance at which the optical depth of a photon of 912 Å reaches 1 while it redshifts",
        "mean_free_path_unit_depth",
    ),
    Source(
        "ℓ(X) of DLAs",
        "incidence",
        "lx_dla",
        "",
        f"absorbers with log N ≥ {DLA_LOG_NHI:g} per unit absorption distance",
        "lx_dla",
    ),
    Source(
        "ℓ(X) of LLS, τ ≥ 2",
        "incidence",
        "lx_lls_tau2",
        "",
        "absorbers with τ ≥ 2 at 912 Å, DLAs included, per unit absorption distance",
        "lx_lls_tau2",
    ),
    Source(
        "τ_eff",
        "lya_opacity",
        "",
        "",
        f"Lyα effective optical depth of columns from the first pivot to log N = {LLS_LOG_NHI:g}",
        "tau_eff",
    ),
)
"""The main numbers, in their order."""


@dataclass(frozen=True)
class Number:
    """A main number at one redshift.

    Parameters
    ----------
    symbol, unit, definition : str
    z : float
    median, lo68, hi68 : float
    remarks : tuple of str
        What to mind: extrapolated, prior-driven.
    """

    symbol: str
    unit: str
    definition: str
    z: float
    median: float
    lo68: float
    hi68: float
    remarks: tuple[str, ...] = ()

    @property
    def rounded(self) -> Rounded:
        """The number as it is printed."""
        return rounded(self.median, self.lo68, self.hi68)

    @property
    def text(self) -> str:
        """Number and unit in plain text."""
        text, unit = self.rounded.text, f" {self.unit}" if self.unit else ""
        if self.median < math.inf:
            return text + unit
        # The unit belongs to the limit within the brackets.
        return f"{text[:-1]}{unit})" if text.endswith(")") else text


@dataclass(frozen=True)
class DataSetLine:
    """A data set in the summary.

    Parameters
    ----------
    name, quantity : str
    n_rows : int
        As listed in its file.
    n_constrained : float
        Effective number of parameters that it fixes.
    p_value : float
        Posterior predictive.
    flags : tuple of str
        In words; empty where there is none.
    """

    name: str
    quantity: str
    n_rows: int
    n_constrained: float
    p_value: float
    flags: tuple[str, ...]


@dataclass(frozen=True)
class Summary:
    """All that the page says.

    Parameters
    ----------
    analysis, version : str
    verdict : tuple of Line
        Five, in a fixed order.
    steps : tuple of Step
        All next steps; the last line of the verdict is the first of them.
    numbers : tuple of Number
    datasets : tuple of DataSetLine
    cautions : tuple of str
    figures : tuple of Figure
    """

    analysis: str
    version: str
    verdict: tuple[Line, ...]
    steps: tuple[Step, ...]
    numbers: tuple[Number, ...]
    datasets: tuple[DataSetLine, ...]
    cautions: tuple[str, ...]
    figures: tuple[Figure, ...]


def read_summary(folder: str | Path) -> Summary:
    """Return the summary of an analysis.

    Parameters
    ----------
    folder : path-like
        Its results: ``convergence.json``, ``tables/``, ``figures/``.
    """
    folder = Path(folder)
    convergence = json.loads((folder / "convergence.json").read_text(encoding="utf-8"))
    tables = {name: read_table(folder / "tables" / f"{name}.ecsv") for name in TABLES}
    tension = folder / "tables" / "tension.ecsv"
    figures = figures_of(folder)
    return summarize(
        convergence, tables, read_table(tension) if tension.exists() else None, figures
    )


def summarize(
    convergence: Mapping[str, Any],
    tables: Mapping[str, Table],
    tension: Table | None = None,
    figures: tuple[Figure, ...] = (),
) -> Summary:
    """Return the summary of results that were read.

    Parameters
    ----------
    convergence : mapping
        Content of ``convergence.json``.
    tables : mapping of str to astropy.table.Table
        Those of `TABLES`.
    tension : astropy.table.Table, optional
        Of the hold-outs, where they were run.
    figures : tuple of Figure
    """
    meta = tables["predictive"].meta
    evidence = Evidence(
        convergence=convergence,
        config=json.loads(meta["config"]),
        predictive=tables["predictive"],
        discrepancies=tables["discrepancies"],
        information=tables["information"],
        by_column=tables["information_by_column"],
        constraints=tables["constraints"],
        tension=tension,
    )
    numbers = tuple(_numbers(tables, evidence))
    steps = next_steps(evidence)
    return Summary(
        analysis=str(meta["analysis"]),
        version=str(meta["fogline_version"]),
        verdict=verdict_lines(evidence, _in_words(numbers), steps),
        steps=steps,
        numbers=numbers,
        datasets=tuple(_datasets(evidence)),
        cautions=tuple(_cautions(tables, evidence, numbers)),
        figures=figures,
    )


def _numbers(tables: Mapping[str, Table], evidence: Evidence) -> Iterator[Number]:
    lowest, highest = evidence.data_redshifts
    driven = evidence.prior_driven
    for source in SOURCES:
        table = tables[source.table]
        z_all = np.asarray(table["z"], float)
        prefix = f"{source.curve}_" if source.curve else ""
        for i in sorted({int(np.argmin(np.abs(z_all - z))) for z in REDSHIFTS}):
            z = float(z_all[i])
            remarks = []
            if not lowest <= z <= highest:
                remarks.append("extrapolated: no data at this redshift")
            if (source.headline, z) in driven:
                remarks.append("prior-driven")
            median, lo68, hi68 = (float(table[prefix + n][i]) for n in ("median", "lo68", "hi68"))
            yield Number(
                symbol=source.symbol,
                unit=source.unit,
                definition=source.definition,
                z=z,
                median=median,
                lo68=lo68,
                hi68=hi68,
                remarks=tuple(remarks),
            )


def _in_words(numbers: tuple[Number, ...]) -> str:
    """Return every main number at the middle of its redshifts, in one sentence."""
    found = sorted({number.z for number in numbers})
    z = found[len(found) // 2]
    parts = [f"{n.symbol} = {n.text}" for n in numbers if n.z == z]
    remarks = sorted({remark for n in numbers if n.z == z for remark in n.remarks})
    also = f" ({'; '.join(remarks)}, see the table)" if remarks else ""
    return f"At z = {z:g}: {'; '.join(parts)}{also}."


def _datasets(evidence: Evidence) -> Iterator[DataSetLine]:
    summaries = evidence.predictive.meta["datasets"]
    for row in evidence.constraints:
        name = str(row["dataset"])
        if name in summaries:
            yield DataSetLine(
                name,
                str(summaries[name]["quantity"]),
                int(row["n_rows"]),
                float(row["n_constrained"]),
                float(summaries[name]["p_value"]),
                tuple(_flags(evidence, name)),
            )


def _flags(evidence: Evidence, name: str) -> Iterator[str]:
    rows = [str(r["row"]) for r in evidence.flagged_rows if str(r["dataset"]) == name]
    if rows:
        yield f"row{'s' if len(rows) > 1 else ''} {', '.join(rows)} outside"
    for row in evidence.flagged_tests:
        if str(row["dataset"]) == name:
            yield f"{row['test']} ({float(row['sigma']):.1f}σ)"
    stated = str(evidence.predictive.meta["datasets"][name]["flag"])
    if stated:
        yield stated
    for row in evidence.tension if evidence.tension is not None else ():
        if name in str(row["datasets"]).replace(",", " ").split() and is_flagged(row):
            yield f"at odds with all others ({float(row['sigma']):.1f}σ)"


def _cautions(
    tables: Mapping[str, Table], evidence: Evidence, numbers: tuple[Number, ...]
) -> Iterator[str]:
    pairs = {symbol: {n.z: n for n in numbers if n.symbol == symbol} for symbol in _PATHS}
    z = min(pairs[_PATHS[0]])
    local, unit = (pairs[symbol][z].median for symbol in _PATHS)
    ratio = f": {unit / local:.2g} times the local one" if unit < math.inf else ", beyond reach"
    yield (
        "The two mean free paths are different quantities; compare like with like. At "
        f"z = {z:g} the unit-depth path is the longer one{ratio}."
        if unit > local
        else "The two mean free paths are different quantities; compare like with like."
    )
    if any(n.hi68 == math.inf for n in numbers):
        yield (
            "“Beyond reach” means that the optical depth stays below 1 down to redshift 0 in "
            "those draws: quote a lower limit, not a length."
        )
    yield _extrapolation(tables, evidence)
    ranges = evidence.prior_ranges
    if ranges:
        yield (
            f"At {ranges} the prior makes more than half of the squared error of log f: a feature "
            "there is no measurement, and neither is an integral that is owed to it."
        )
    note = tables["hi_density"].meta.get("note")
    if note:
        yield f"ρ_HI and Ω_HI: {note}. Mass beyond the last pivot is not counted."
    helium = float(evidence.config["derive"]["helium_factor"])
    yield (
        f"Ω_gas in `tables/hi_density` is Ω_HI times {helium:g} for helium: it is neither Ω_HI nor "
        "a measurement of molecules or ionized gas."
    )
    yield (
        "ℓ(X) counts per absorption distance, ℓ(z) per redshift; τ ≥ 2 leaves out the systems of "
        "1 ≤ τ < 2. τ_eff depends on the columns counted and on the Doppler parameter."
    )
    yield (
        "Predictive p-values of data sets use the data twice and lean towards 0.5; what the rows "
        "of a data set have in common, only hold-outs show."
    )


_PATHS: Final = ("local mean free path", "unit-depth mean free path")


def _extrapolation(tables: Mapping[str, Table], evidence: Evidence) -> str:
    lowest, highest = evidence.data_redshifts
    z = np.asarray(tables["mean_free_path"]["z"], float)
    outside = z[(z < lowest) | (z > highest)]
    text = (
        f"Data lie between z = {lowest:.3g} and {highest:.3g}; beyond, every curve is the model's"
    )
    return (
        f"{text}, as at {len(outside)} of the {len(z)} redshifts of the derived tables."
        if len(outside)
        else f"{text}."
    )
