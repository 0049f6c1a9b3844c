"""``fogline check``: validate a config and constraint files, and say what they hold."""

from __future__ import annotations

import argparse
import os
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any

from fogline.commands.selection import DEFAULT_CONFIG
from fogline.faults import Fault, InputError

if TYPE_CHECKING:
    from fogline.datasets import DataSet
    from fogline.settings import AnalysisSettings, Study

_HEADINGS = ("data set", "quantity", "rows", "z", "log N_HI", "source")
_SOURCE_WIDTH = 60


def add_to(commands: Any) -> None:
    """Add the command to a parser's subparsers."""
    parser = commands.add_parser(
        "check",
        help="validate a config and constraint files",
        description="Validate a config, the constraint files that it names, and further files; "
        "print one row per data set. Everything wrong is reported at once, as FILE:LINE.",
    )
    parser.add_argument(
        "--config",
        metavar="C",
        help=f"config file (default: {DEFAULT_CONFIG} where no FILE is given)",
    )
    parser.add_argument("files", metavar="FILE", nargs="*", help="constraint file, or side table")
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> None:
    """Check what the options name and print the data sets."""
    from fogline.side_tables import side_kind

    faults: list[Fault] = []
    config = options.config
    if config is None and not options.files:
        config = DEFAULT_CONFIG
    study = None if config is None else _check_config(config, faults)
    analyses = [] if study is None else list(study.analyses.values())
    sides, files = _told_apart(options.files)
    datasets = _read_all([*_files_of(analyses), *files], faults)
    for analysis in analyses:
        faults.extend(_analysis_faults(analysis, datasets))
    faults.extend(_side_faults(_side_files(analyses) + sides))
    extra = {os.path.normpath(path) for path in files} - set(_files_of(analyses))
    if analyses:
        faults.extend(_extra_faults([datasets[path] for path in extra & set(datasets)], analyses))
    if faults:
        raise InputError(faults)
    if datasets:
        print(_listing(list(datasets.values())))
    for path in sides:
        print(f"{path}: good {side_kind(path)} table")
    if study is not None:
        print(f"{config}: {_listed('analysis', 'analyses', list(study.analyses))}")


def _told_apart(paths: Iterable[str]) -> tuple[list[str], list[str]]:
    """Return side tables, such as filters, and constraint files."""
    from fogline.side_tables import side_kind

    sides = [path for path in paths if side_kind(path)]
    return sides, [path for path in paths if path not in sides]


def _side_files(analyses: Iterable[AnalysisSettings]) -> list[str]:
    return list(dict.fromkeys(path for a in analyses for path in a.derive.side_files))


def _side_faults(paths: Iterable[str]) -> list[Fault]:
    from fogline.side_tables import read_side_table

    faults: list[Fault] = []
    for path in paths:
        try:
            read_side_table(path)
        except InputError as error:
            faults.extend(error.faults)
    return faults


def _check_config(path: str, faults: list[Fault]) -> Study | None:
    from fogline.config import check_distributions, check_forecasts, parse_config
    from fogline.yaml_lines import read_yaml

    try:
        document = read_yaml(path)
        study = parse_config(document.value, path, document.line)
    except InputError as error:
        faults.extend(error.faults)
        return None
    faults.extend(check_distributions(study, path, document.line))
    faults.extend(check_forecasts(study, path, document.line))
    return study


def _files_of(analyses: Iterable[AnalysisSettings]) -> list[str]:
    return list(dict.fromkeys(path for analysis in analyses for path in analysis.datasets))


def _read_all(paths: Iterable[str], faults: list[Fault]) -> dict[str, DataSet]:
    """Return the data sets by normalized path, each file read once."""
    from fogline.constraint_files import read_constraint_file

    datasets = {}
    for path in {os.path.normpath(path): path for path in paths}.values():
        try:
            datasets[os.path.normpath(path)] = read_constraint_file(path)
        except InputError as error:
            faults.extend(error.faults)
    return datasets


def _analysis_faults(analysis: AnalysisSettings, datasets: dict[str, DataSet]) -> list[Fault]:
    from fogline.column_ranges import check_column_range
    from fogline.constraint_files import duplicate_stems

    columns = analysis.model.column_range
    read = [datasets[path] for path in analysis.datasets if path in datasets]
    beyond = [fault for dataset in read for fault in check_column_range(dataset, columns)]
    return [*duplicate_stems(analysis.datasets), *beyond]


def _extra_faults(datasets: Iterable[DataSet], analyses: Sequence[AnalysisSettings]) -> list[Fault]:
    """Return a fault for each further file that no analysis of the config could take."""
    from fogline.column_ranges import check_column_range

    faults = []
    for dataset in datasets:
        found = [check_column_range(dataset, analysis.model.column_range) for analysis in analyses]
        if all(found):
            faults.extend(found[0])
    return faults


def _listing(datasets: Sequence[DataSet]) -> str:
    rows = [_HEADINGS, *(_row(dataset) for dataset in datasets)]
    widths = [max(len(row[i]) for row in rows) for i in range(len(_HEADINGS))]
    lines = ("  ".join(f"{cell:<{n}}" for cell, n in zip(row, widths, strict=True)) for row in rows)
    return "\n".join(line.rstrip() for line in lines)


def _row(dataset: DataSet) -> tuple[str, ...]:
    from fogline.column_ranges import column_ranges, range_text

    low, high = dataset.z_lo.min(), dataset.z_hi.max()
    source = " ".join(dataset.source.split())
    if len(source) > _SOURCE_WIDTH:
        source = f"{source[: _SOURCE_WIDTH - 1]}…"
    z = f"{low:g}" if low == high else f"{low:g} to {high:g}"
    columns = range_text(*column_ranges(dataset))
    return dataset.name, dataset.quantity, str(dataset.n_listed), z, columns, source


def _listed(one: str, many: str, names: Sequence[str]) -> str:
    return f"{one if len(names) == 1 else many} {', '.join(names)}"
