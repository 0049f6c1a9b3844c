"""Derived quantities. A new table is one module and one line of `DERIVED_TABLES`."""

from pathlib import Path
from typing import Any, Final

from fogline.derived.base import DerivedTable, Draws
from fogline.derived.column_distribution import ColumnDistributionTable
from fogline.derived.hi_density import HiDensityTable
from fogline.derived.incidence import IncidenceTable
from fogline.derived.lya_opacity import LyaOpacityTable
from fogline.derived.mean_free_path import MeanFreePathTable
from fogline.derived.opacity_budget import OpacityBudgetTable
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
    )
}
"""Every derived table by its name."""


def write_derived(draws: Draws, directory: str | Path, /, *, with_bands: bool, **meta: Any) -> None:
    """Write every derived table.

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
    for name, derived in DERIVED_TABLES.items():
        table = curve_table(derived.keys(draws), derived.curves(draws), with_bands=with_bands)
        table.meta["definition"] = derived.definition
        write_table(table, Path(directory) / f"{name}.ecsv", **meta)


__all__ = ["DERIVED_TABLES", "DerivedTable", "Draws", "write_derived"]
