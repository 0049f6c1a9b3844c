"""The measured quantities. A new one is one module and one line of `QUANTITIES`."""

from typing import Final

from fogline.quantities.absorber_list import AbsorberList
from fogline.quantities.base import Block, Quantity, Setting
from fogline.quantities.column_distribution import ColumnDistributionBins
from fogline.quantities.continuum_flux import ContinuumFlux
from fogline.quantities.hi_density import HiDensity
from fogline.quantities.lls_incidence import LlsIncidence
from fogline.quantities.lya_opacity import LyaOpacity
from fogline.quantities.lyman_series_opacity import LymanSeriesOpacity
from fogline.quantities.mean_free_path import MeanFreePath
from fogline.quantities.spec import FileSpec

QUANTITIES: Final[dict[str, Quantity]] = {
    quantity.spec.quantity: quantity
    for quantity in (
        LyaOpacity(),
        LlsIncidence(),
        MeanFreePath(),
        ColumnDistributionBins(),
        HiDensity(),
        LymanSeriesOpacity(),
        ContinuumFlux(),
        AbsorberList(),
    )
}
"""Every quantity by its name in constraint files."""

FILE_SPECS: Final[dict[str, FileSpec]] = {name: q.spec for name, q in QUANTITIES.items()}
"""What the constraint file of each quantity must hold."""

__all__ = ["FILE_SPECS", "QUANTITIES", "Block", "Quantity", "Setting"]
