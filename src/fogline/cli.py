"""The command ``fogline``: validate, start a file, predict and derive at a point.

Each command is a module of `fogline.commands`, which imports what it needs only when it runs. A
fault in what the user wrote goes to stderr, one line each, with exit status 2.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from importlib import metadata

from fogline.commands import check, derive, path, predict, template
from fogline.commands.selection import UsageError
from fogline.faults import InputError


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : sequence of str, optional
        Of the command line; those of the process where not given.

    Returns
    -------
    int
        Exit status: 0, or 2 where the user's input is at fault.
    """
    options = build_parser().parse_args(arguments)
    try:
        options.run(options)
        sys.stdout.flush()
    except InputError as error:
        print(error, file=sys.stderr)
        return 2
    except UsageError as error:
        print(f"fogline: {error}", file=sys.stderr)
        return 2
    except BrokenPipeError:
        # The reader (head, less) has gone; what python still flushes at exit must go nowhere.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1
    except OSError as error:
        where = f": {error.filename}" if error.filename else ""
        print(f"fogline: {error.strerror or error}{where}", file=sys.stderr)
        return 1
    except KeyboardInterrupt:
        return 130
    return 0


def build_parser() -> argparse.ArgumentParser:
    """Return the parser of the command line."""
    parser = argparse.ArgumentParser(
        prog="fogline",
        description="One column-density distribution of neutral hydrogen, fitted to every kind of "
        "quasar absorption measurement. Fits are run by snakemake; these commands help "
        "with its inputs.",
    )
    version = metadata.version("fogline")
    parser.add_argument("--version", action="version", version=f"fogline {version}")
    commands = parser.add_subparsers(title="commands", metavar="COMMAND", required=True)
    for command in (check, template, path, predict, derive):
        command.add_to(commands)
    return parser


if __name__ == "__main__":
    sys.exit(main())
