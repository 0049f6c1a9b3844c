"""``fogline derive``: the derived tables of an analysis at given parameters."""

from __future__ import annotations

import argparse
from typing import Any

from fogline.commands.selection import add_selection, select


def add_to(commands: Any) -> None:
    """Add the command to a parser's subparsers."""
    text = "Write the derived tables of an analysis at given parameters: one curve each, no bands."
    help = "write the derived tables at given parameters"
    parser = commands.add_parser("derive", help=help, description=text)
    add_selection(parser)
    parser.add_argument("--output", metavar="DIR", required=True, help="folder for the tables")
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> None:
    """Write the tables that the options ask for."""
    analysis, point = select(options)

    from fogline.predictions import write_derived_at

    print("\n".join(write_derived_at(analysis, point.theta, options.output)))
