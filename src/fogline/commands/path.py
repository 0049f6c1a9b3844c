"""``fogline path``: turn a list of sightlines into the number that cover each redshift."""

from __future__ import annotations

import argparse
import sys
from typing import Any


def add_to(commands: Any) -> None:
    """Add the command to a parser's subparsers."""
    text = (
        "Turn the sightlines of a survey (kind sightlines: z_start, z_end) into g(z), the number "
        "that cover each redshift (kind sensitivity). Every change of g stands as two rows, before "
        "and after it, since g is linear between rows."
    )
    help = "turn a list of sightlines into g(z)"
    parser = commands.add_parser("path", help=help, description=text)
    parser.add_argument("sightlines", metavar="SIGHTLINES.ecsv", help="list of sightlines")
    parser.add_argument("--output", metavar="G.ecsv", help="file to write (default: stdout)")
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> None:
    """Write g(z) of the sightlines that the options name."""
    from fogline.absorbers.path import sensitivity_table
    from fogline.side_tables import read_side_table
    from fogline.tables import write_table

    path = read_side_table(options.sightlines, "sightlines")
    table = sensitivity_table(path["z_start"], path["z_end"])
    table.meta["source"] = f"sightlines of {options.sightlines}"
    if options.output is None:
        table.write(sys.stdout, format="ascii.ecsv")
    else:
        write_table(table, options.output)
