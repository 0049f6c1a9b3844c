"""``fogline predict``: predictions for every row of an analysis at given parameters."""

from __future__ import annotations

import argparse
import sys
from typing import Any

from fogline.commands.selection import add_selection, select


def add_to(commands: Any) -> None:
    """Add the command to a parser's subparsers."""
    text = (
        "Predict every row of every data set of an analysis at given parameters, in the data's own "
        "convention. The table has the columns dataset, row, quantity, z, observed, predicted, and "
        "ln_likelihood in its meta."
    )
    help = "predict every row of the data at given parameters"
    parser = commands.add_parser("predict", help=help, description=text)
    add_selection(parser)
    parser.add_argument("--output", metavar="O.ecsv", help="file to write (default: stdout)")
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> None:
    """Write the predictions that the options ask for."""
    analysis, point = select(options)

    from fogline.inputs import read_inputs
    from fogline.nuisances import nuisances_of
    from fogline.predictions import predict_table
    from fogline.tables import write_table

    datasets = read_inputs(analysis)
    theta = point.with_nuisances(nuisances_of(datasets))
    table = predict_table(analysis, datasets, theta)
    if options.output is None:
        table.write(sys.stdout, format="ascii.ecsv")
    else:
        write_table(table, options.output)
