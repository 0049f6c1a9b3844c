"""``fogline template``: print a starter constraint file."""

from __future__ import annotations

import argparse
import sys
from typing import Any

from fogline.commands.selection import UsageError
from fogline.faults import nearest


def add_to(commands: Any) -> None:
    """Add the command to a parser's subparsers."""
    parser = commands.add_parser(
        "template",
        help="print a starter constraint file of a quantity",
        description="Print a commented starter constraint file. As printed it is valid, with "
        "example numbers to replace; comments show the other forms that it may take.",
    )
    parser.add_argument(
        "quantity",
        metavar="QUANTITY",
        nargs="?",
        help="what is measured, or a kind of table beside it; without it, all are listed",
    )
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> None:
    """Print the template of ``options.quantity``, or the quantities that there are."""
    # Here, not above: the quantities bring scipy and astropy, which --help does not need.
    from fogline.quantities import FILE_SPECS
    from fogline.side_tables import SIDE_TABLES, side_template
    from fogline.templates import template

    known = {name: spec.description for name, spec in (FILE_SPECS | SIDE_TABLES).items()}
    if options.quantity is None:
        width = max(map(len, known))
        for name, description in known.items():
            print(f"{name:<{width}}  {description}")
    elif options.quantity in FILE_SPECS:
        sys.stdout.write(template(options.quantity))
    elif options.quantity in SIDE_TABLES:
        sys.stdout.write(side_template(options.quantity))
    else:
        hint = nearest(options.quantity, known)
        raise UsageError(f"unknown quantity '{options.quantity}'; {hint}")
