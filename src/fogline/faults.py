"""Faults in what users write, gathered and reported all at once.

A reader or validator collects every `Fault` it finds and raises one `InputError`; the command
line and the workflow print it, one line a fault, and exit with status 2.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True, order=True)
class Fault:
    """One thing wrong in a file that a user wrote.

    Parameters
    ----------
    path : str
        The file, as the user named it.
    line : int
        1-based line; 1 where the fault belongs to the whole file.
    what : str
        What is wrong, what was found and what is allowed, in one line.
    """

    path: str
    line: int
    what: str

    def __str__(self) -> str:
        return f"{self.path}:{self.line}: {self.what}"


class InputError(ValueError):
    """Everything that is wrong with a user's files; one line a fault.

    Parameters
    ----------
    faults : iterable of Fault
        At least one.
    """

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults = tuple(sorted(set(faults)))
        super().__init__("\n".join(str(fault) for fault in self.faults))


def nearest(word: str, known: Iterable[str]) -> str:
    """Return a hint that names the nearest known word, or all of them.

    Parameters
    ----------
    word : str
        What was found.
    known : iterable of str
        What is allowed.

    Returns
    -------
    str
        ``did you mean 'x'?`` where something is near, else ``allowed: a, b, c``.
    """
    known = sorted(known)
    near = difflib.get_close_matches(word, known, n=1, cutoff=0.6)
    return f"did you mean '{near[0]}'?" if near else f"allowed: {', '.join(known)}"
