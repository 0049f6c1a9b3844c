"""Tables with one line a row of the data."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

from fogline.datasets import DataSet


def visible_rows(datasets: Sequence[DataSet]) -> NDArray[np.bool_]:
    """Return which rows of data sets stand for a measurement or count of their own."""
    return np.concatenate([data.visible for data in datasets])


def row_table(datasets: tuple[DataSet, ...]) -> Table:
    """Return data set, row, quantity, redshift and observed value of every row."""
    table = Table()
    table["dataset"] = [data.name for data in datasets for _ in range(data.n_rows)]
    table["row"] = np.concatenate([np.cumsum(data.visible) - 1 for data in datasets])
    table["quantity"] = [data.quantity for data in datasets for _ in range(data.n_rows)]
    table["z"] = np.concatenate([data.z for data in datasets])
    table["observed"] = np.concatenate([data.observed for data in datasets])
    return table
