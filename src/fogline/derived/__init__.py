"""Derived quantities. A new table is one module and one line of `DERIVED_TABLES`."""

from pathlib import Path
from typing import Any, Final

from fogline.derived.base import DerivedTable, Draws
from fogline.derived.column_distribution import ColumnDistributionTable
from fogline.derived.depth_path import DepthPathTable
from fogline.derived.hi_density import HiDensityTable
from fogline.derived.incidence import IncidenceTable
from fogline.derived.ionizing_background import BreakthroughTable, IonizingBackgroundTable
from fogline.derived.lya_opacity import LyaOpacityTable
from fogline.derived.mean_free_path import MeanFreePathTable
from fogline.derived.opacity_budget import OpacityBudgetTable
from fogline.derived.opacity_classes import OpacityClassesTable
from fogline.derived.sightline_scatter import EscapeCorrectionTable, SightlineScatterTable
from fogline.derived.transmission import TransmissionTable
from fogline.tables import curve_table, write_table

DERIVED_TABLES: Final[dict[str, DerivedTable]] = {
    table.name: table
    for table in (
        ColumnDistributionTable(),
        IncidenceTable(),
        HiDensityTable(),
        LyaOpacityTable(),
        MeanFreePathTable(),
        OpacityBudgetTable(),
        TransmissionTable(),
        SightlineScatterTable(),
        EscapeCorrectionTable(),
        OpacityClassesTable(),
        DepthPathTable(),
        IonizingBackgroundTable(),
        BreakthroughTable(),
    )
}
"""Every derived table by its name."""


def write_derived(
    draws: Draws, directory: str | Path, /, *, with_bands: bool, **meta: Any
) -> list[str]:
    """Write every derived table; return ``NAME: note`` of those that have something to note.

    Parameters
    ----------
    draws : Draws
        Posterior draws, or a single parameter vector.
    directory : path-like
        Where ``<name>.ecsv`` go.
    with_bands : bool
        Bands over draws; else the values of the first draw.
    **meta
        Provenance for the tables' meta.
    """
    notes = []
    for name, derived in DERIVED_TABLES.items():
        # Bands over sightlines are there for a single parameter vector too.
        banded = with_bands or getattr(derived, "over_sightlines", False)
        table = curve_table(derived.keys(draws), derived.curves(draws), with_bands=banded)
        table.meta["definition"] = derived.definition
        if hasattr(derived, "note"):
            table.meta["note"] = derived.note(draws)
            notes.append(f"{name}: {table.meta['note']}")
        write_table(table, Path(directory) / f"{name}.ecsv", **meta)
    return notes


__all__ = ["DERIVED_TABLES", "DerivedTable", "Draws", "write_derived"]
