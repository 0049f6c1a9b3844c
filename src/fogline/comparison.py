"""What analyses of the same data say, set side by side."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Final

import numpy as np
from astropy.table import Table

from fogline.headlines import COLUMNS, HEADLINES, REDSHIFTS

DEFINITION: Final = (
    "difference_sigma: error of median - reference_median, from the noise that the analyses do not "
    "share (first order; data and priors that both have drop out); NaN where that is less than a "
    "tenth of the error itself. shift_sigma: the difference in units of it, beyond 3 a sign that "
    "what one analysis has and the other has not does not fit. Different priors and models count "
    "as independent statements. ln_evidence: ln Z with its numerical error; only analyses of the "
    "same data sets may be compared by it."
)

SAME_REDSHIFT: Final = 1e-6

EVIDENCE: Final = "ln_evidence"
"""Quantity of the rows that hold ln Z."""

DTYPES: Final = {
    "analysis": "U64",
    "reference": "U64",
    "quantity": "U64",
    "z": float,
    "median": float,
    "lo68": float,
    "hi68": float,
    "reference_median": float,
    "difference_sigma": float,
    "shift_sigma": float,
}
"""Columns of the comparison."""


@dataclass(frozen=True)
class Value:
    """One quantity at one redshift in one analysis: median and 68% interval."""

    quantity: str
    z: float
    median: float
    lo68: float
    hi68: float

    @property
    def sigma(self) -> float:
        """Half the width of the 68% interval; infinite where it has no end."""
        return 0.5 * (self.hi68 - self.lo68) if np.isfinite(self.hi68) else float("inf")


def compare(
    results: Mapping[str, Mapping[str, Table]],
    evidences: Mapping[str, tuple[float, float]] | None = None,
    differences: Mapping[str, Mapping[tuple[str, float], float]] | None = None,
) -> Table:
    """Compare the headline quantities of analyses with those of the first.

    Parameters
    ----------
    results : mapping of str to mapping of str to astropy.table.Table
        The derived tables of every analysis by their names; the first analysis is the reference.
    evidences : mapping of str to (float, float), optional
        ln Z of every analysis, and its error.
    differences : mapping of str to mapping of (str, float) to float, optional
        Error of the difference of every quantity and redshift from the first analysis, as
        `fogline.trust.differences` has it. Both errors in quadrature where it is not given.

    Returns
    -------
    astropy.table.Table
        ``analysis, reference, quantity, z, median, lo68, hi68, reference_median,
        difference_sigma, shift_sigma``; NaN shift where an interval reaches beyond what is finite.
        No rows for one analysis.
    """
    reference, *others = results
    wanted = {(value.quantity, value.z): value for value in headline_values(results[reference])}
    rows = [
        _row(analysis, reference, value, wanted[value.quantity, value.z], differences)
        for analysis in others
        for value in headline_values(results[analysis])
        if (value.quantity, value.z) in wanted
    ]
    if evidences:
        rows += [_evidence_row(name, reference, evidences) for name in others]
    table = Table(rows=rows, names=list(DTYPES), dtype=list(DTYPES.values()))
    table.meta["definition"] = DEFINITION
    return table


def _evidence_row(
    analysis: str, reference: str, evidences: Mapping[str, tuple[float, float]]
) -> tuple[object, ...]:
    """Return ln Z with its error as the band; a shift in units of that error says nothing."""
    ln_z, error = evidences[analysis]
    base, nan = evidences[reference][0], float("nan")
    return (analysis, reference, EVIDENCE, nan, ln_z, ln_z - error, ln_z + error, base, nan, nan)


def _row(
    analysis: str,
    reference: str,
    value: Value,
    base: Value,
    differences: Mapping[str, Mapping[tuple[str, float], float]] | None,
) -> tuple[object, ...]:
    error = float(np.hypot(value.sigma, base.sigma))
    if differences is not None:
        error = _nearest_difference(differences[analysis], value)
    # An error beyond reach would make every shift zero: nothing is said instead.
    error = error if np.isfinite(error) else float("nan")
    shift = (value.median - base.median) / error
    numbers = (value.z, value.median, value.lo68, value.hi68, base.median, error, shift)
    return (analysis, reference, value.quantity, *numbers)


def _nearest_difference(known: Mapping[tuple[str, float], float], value: Value) -> float:
    """Return the error of a difference; redshifts of tables and draws agree but for rounding."""
    same = [(abs(z - value.z), error) for (q, z), error in known.items() if q == value.quantity]
    distance, error = min(same, default=(np.inf, float("nan")))
    return error if distance < SAME_REDSHIFT else float("nan")


def headline_values(tables: Mapping[str, Table]) -> Iterator[Value]:
    """Give the headline quantities that derived tables hold.

    Parameters
    ----------
    tables : mapping of str to astropy.table.Table
        By name; quantities of a table that is missing are left out.
    """
    for headline in HEADLINES:
        if headline.table not in tables:
            continue
        table = tables[headline.table]
        prefix = f"{headline.curve}_" if headline.curve else ""
        for z in REDSHIFTS:
            yield _value(table[_nearest(table["z"], z)], headline.quantity, prefix)
    if "column_distribution" not in tables:
        return
    table = tables["column_distribution"]
    reference = table[np.asarray(table["z"]) == table["z"][0]]
    for log_nhi in COLUMNS:
        yield _value(reference[_nearest(reference["log_nhi"], log_nhi)], f"log_f[{log_nhi:g}]", "")


def _nearest(column: object, wanted: float) -> int:
    return int(np.argmin(np.abs(np.asarray(column, float) - wanted)))


def _value(row: Table.Row, quantity: str, prefix: str) -> Value:
    median, lo68, hi68 = (float(row[prefix + name]) for name in ("median", "lo68", "hi68"))
    return Value(quantity, float(row["z"]), median, lo68, hi68)
