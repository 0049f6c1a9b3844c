"""What several commands take: a config, one of its analyses, and that analysis' data sets."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from fogline.faults import Fault, InputError, nearest

if TYPE_CHECKING:
    from fogline.points import Point
    from fogline.settings import AnalysisSettings

DEFAULT_CONFIG = "config/config.yaml"


class UsageError(Exception):
    """A wrong argument on the command line, which no file and line can be given for."""


def add_selection(parser: argparse.ArgumentParser) -> None:
    """Add the options that choose an analysis and a point of its parameters."""
    parser.add_argument(
        "--config", metavar="C", default=DEFAULT_CONFIG, help="config file (default: %(default)s)"
    )
    parser.add_argument("--analysis", metavar="A", required=True, help="its analysis of that name")
    parser.add_argument(
        "--point",
        metavar="P.yaml",
        required=True,
        help="parameters: 'log_f: [one per pivot, at the reference redshift]' and "
        "'evolution: [one per evolution pivot]'",
    )


def select(options: argparse.Namespace) -> tuple[AnalysisSettings, Point]:
    """Return the analysis and the point that the options choose.

    Parameters
    ----------
    options : argparse.Namespace
        With ``config``, ``analysis`` and ``point``.

    Returns
    -------
    analysis : AnalysisSettings
    point : Point

    Raises
    ------
    InputError
        Where one of them is at fault.
    """
    from fogline.config import check_distributions, parse_config
    from fogline.points import read_point
    from fogline.yaml_lines import read_yaml

    document = read_yaml(options.config)
    study = parse_config(document.value, options.config, document.line)
    if options.analysis not in study.analyses:
        hint = nearest(options.analysis, study.analyses)
        line = document.line(("analyses",))
        what = f"has no analysis '{options.analysis}'; {hint}"
        raise InputError([Fault(options.config, line, what)])
    faults = check_distributions(study, options.config, document.line)
    if faults:
        raise InputError(faults)
    analysis = study.analyses[options.analysis]
    return analysis, read_point(options.point, analysis.model)
