"""The files of an analysis: names and globs resolved, and those that ``exclude`` names left out."""

from __future__ import annotations

import difflib
import fnmatch
import glob
import os
from collections.abc import Callable, Iterable, Sequence

from fogline.yaml_lines import Place

Pattern = tuple[Place, str]
"""A file name or glob, and where in the config it stands."""


def find_files(
    datasets: Iterable[Pattern], exclude: Sequence[Pattern], fault: Callable[[Place, str], None]
) -> tuple[str, ...]:
    """Return the files that patterns name, sorted and each once.

    Parameters
    ----------
    datasets : iterable of (tuple, str)
        Names or globs, relative to the working directory.
    exclude : sequence of (tuple, str)
        Names or globs of files to leave out.
    fault : callable
        Takes the place and what is wrong there.

    Returns
    -------
    tuple of str
    """
    found: set[str] = set()
    for place, pattern in datasets:
        files = _matching(pattern)
        if not files:
            fault(place, _nothing_found(pattern))
        found.update(files)
    left_out = set()
    for place, pattern in exclude:
        matches = {path for path in found if _matches(path, pattern)}
        if found and not matches:
            fault(place, f"excludes '{pattern}', which no data set matches{_near(pattern, found)}")
        left_out |= matches
    if found and found == left_out:
        fault(exclude[-1][0], "excludes every data set")
    return tuple(sorted(found - left_out))


def _matching(pattern: str) -> list[str]:
    if os.path.isfile(pattern):
        return [os.path.normpath(pattern)]
    try:
        hits = glob.glob(pattern, recursive=True)
    except ValueError:  # a null character
        hits = []
    return [os.path.normpath(hit) for hit in hits if os.path.isfile(hit)]


def _matches(path: str, pattern: str) -> bool:
    pattern = os.path.normpath(pattern)
    return path == pattern or fnmatch.fnmatchcase(path, pattern)


def _nothing_found(pattern: str) -> str:
    if glob.has_magic(pattern):
        return f"glob '{pattern}' matches no file"
    folder = os.path.dirname(pattern) or "."
    try:
        beside = [os.path.normpath(os.path.join(folder, name)) for name in os.listdir(folder)]
    except (OSError, ValueError):
        return f"no such file: '{pattern}' (folder '{folder}' does not exist)"
    return f"no such file: '{pattern}'{_near(pattern, beside)}"


def _near(pattern: str, known: Iterable[str]) -> str:
    near = difflib.get_close_matches(pattern, sorted(known), n=1)
    return f"; did you mean '{near[0]}'?" if near else ""
