"""The constraint files of an analysis, read and checked against its model."""

from __future__ import annotations

from fogline.column_ranges import check_column_range
from fogline.constraint_files import read_constraint_files
from fogline.datasets import DataSet
from fogline.faults import InputError
from fogline.settings import AnalysisSettings


def read_inputs(analysis: AnalysisSettings) -> list[DataSet]:
    """Return the data sets of an analysis.

    Parameters
    ----------
    analysis : AnalysisSettings

    Returns
    -------
    list of DataSet

    Raises
    ------
    InputError
        With every fault of every file, or where a file needs f beyond the pivots.
    """
    datasets = read_constraint_files(analysis.datasets)
    pivots = analysis.model.pivots
    faults = [fault for dataset in datasets for fault in check_column_range(dataset, pivots)]
    if faults:
        raise InputError(faults)
    return datasets
