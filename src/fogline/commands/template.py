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
        help="what is measured; without it, all are listed",
    )
    parser.set_defaults(run=run)


def run(options: argparse.Namespace) -> None:
    """Print the template of ``options.quantity``, or the quantities that there are."""
    # Here, not above: the quantities bring scipy and astropy, which --help does not need.
    from fogline.quantities import FILE_SPECS
    from fogline.templates import template

    if options.quantity is None:
        width = max(map(len, FILE_SPECS))
        for name, spec in FILE_SPECS.items():
            print(f"{name:<{width}}  {spec.description}")
        return
    if options.quantity not in FILE_SPECS:
        hint = nearest(options.quantity, FILE_SPECS)
        raise UsageError(f"unknown quantity '{options.quantity}'; {hint}")
    sys.stdout.write(template(options.quantity))
