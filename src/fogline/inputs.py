"""The constraint files of an analysis, read and checked against its model."""

from __future__ import annotations

from dataclasses import replace

from fogline.column_ranges import check_column_range
from fogline.constraint_files import read_constraint_files
from fogline.datasets import DataSet
from fogline.faults import Fault, InputError
from fogline.file_meta import NOT_FOR_COUNTS
from fogline.settings import AnalysisSettings


def with_nuisances(datasets: list[DataSet], analysis: AnalysisSettings) -> list[DataSet]:
    """Return data sets with the nuisance settings of an analysis laid over their own meta.

    Parameters
    ----------
    datasets : list of DataSet
    analysis : AnalysisSettings

    Raises
    ------
    InputError
        Where the config gives counts a scatter or a Student-t.
    """
    faults = [
        Fault(data.path, 1, f"{key} in the config's nuisances has no effect on counts or lists")
        for data in datasets
        for key in analysis.nuisances.get(data.name, {})
        if (data.counts or data.role is not None) and key in NOT_FOR_COUNTS
    ]
    if faults:
        raise InputError(faults)
    return [
        replace(data, meta={**data.meta, **analysis.nuisances.get(data.name, {})})
        for data in datasets
    ]


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
    datasets = with_nuisances(read_constraint_files(analysis.datasets), analysis)
    columns = analysis.model.column_range
    faults = [fault for dataset in datasets for fault in check_column_range(dataset, columns)]
    if faults:
        raise InputError(faults)
    return datasets
