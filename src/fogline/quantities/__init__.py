"""The measured quantities. A new one is one module and one line of `QUANTITIES`."""

from typing import Final

from fogline.quantities.base import Block, Quantity, Setting
from fogline.quantities.column_distribution import ColumnDistributionBins
from fogline.quantities.hi_density import HiDensity
from fogline.quantities.lls_incidence import LlsIncidence
from fogline.quantities.lya_opacity import LyaOpacity
from fogline.quantities.mean_free_path import MeanFreePath

QUANTITIES: Final[dict[str, Quantity]] = {
    quantity.spec.quantity: quantity
    for quantity in (
        LyaOpacity(),
        LlsIncidence(),
        MeanFreePath(),
        ColumnDistributionBins(),
        HiDensity(),
    )
}
"""Every quantity by its name in constraint files."""

__all__ = ["QUANTITIES", "Block", "Quantity", "Setting"]
