"""Files that a constraint file names in its header: its covariance, for one.

The workflow asks for them before any job runs, so that a changed one reruns what depends on it;
nothing here imports more than yaml. Faults are not this module's: it says nothing of headers that
it cannot read, and the reader of the file says all.
"""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any, Final

import yaml

LINKS: Final = ("covariance", "survey_path", "completeness")
"""Meta keys whose value is a file, relative to the folder of the constraint file."""


def linked_path(constraint_file: str | os.PathLike[str], name: str) -> str:
    """Return the path of a file that a constraint file names.

    Parameters
    ----------
    constraint_file : path-like
    name : str
        As the file's meta has it.
    """
    return str(Path(constraint_file).parent / name)


def linked_files(constraint_file: str | os.PathLike[str]) -> list[str]:
    """Return the existing files that a constraint file names.

    Parameters
    ----------
    constraint_file : path-like
    """
    meta = header_meta(constraint_file)
    named = [meta[key] for key in LINKS if isinstance(meta.get(key), str)]
    paths = [linked_path(constraint_file, name) for name in named]
    return [path for path in paths if os.path.isfile(path)]


def header_meta(path: str | os.PathLike[str]) -> dict[str, Any]:
    """Return the meta of an ECSV header; empty where there is none to be read.

    Parameters
    ----------
    path : path-like
    """
    lines = []
    try:
        with open(path, encoding="utf-8") as file:
            for line in file:
                if line.strip() and not line.lstrip().startswith("#"):
                    break
                lines.append(line.lstrip()[2:])
        # The first line names the format.
        loader = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
        header = yaml.load("".join(lines[1:]), Loader=loader)
    except (OSError, UnicodeDecodeError, yaml.YAMLError):
        return {}
    meta = header.get("meta") if isinstance(header, dict) else None
    if isinstance(meta, list):  # astropy writes a mapping as ordered pairs
        return dict(pair for pair in meta if isinstance(pair, tuple))
    return meta if isinstance(meta, dict) else {}
