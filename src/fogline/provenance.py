"""What made a result: hashes of inputs, settings and code, carried by every output.

`code_hash` covers a module of the package and all package modules that it imports, directly or
through others, found by reading the source. Workflow rules carry it in ``params``, so that a change
in the code reruns what uses it and nothing else. Nothing here imports numpy or scipy: the workflow
calls it at every start.
"""

from __future__ import annotations

import hashlib
import json
import re
from collections.abc import Mapping
from dataclasses import asdict, is_dataclass
from functools import lru_cache
from importlib import metadata
from pathlib import Path
from typing import Any

PACKAGE_ROOT = Path(__file__).parent
DIGITS = 16

# A pattern, not a parser: parsing every module took a quarter of the workflow's start-up. At worst
# an import that stands in a docstring is followed as well.
_IMPORT = re.compile(
    r"^[ \t]*(?:from (fogline[\w.]*) import (\([^)]*\)|[^\n]*)|import (fogline[\w.]*))",
    re.MULTILINE,
)


def version() -> str:
    """Return the installed version of the package."""
    return metadata.version("fogline")


def file_hash(path: str | Path) -> str:
    """Return the hash of a file's content, `DIGITS` hexadecimal digits of SHA-256."""
    return hashlib.sha256(Path(path).read_bytes()).hexdigest()[:DIGITS]


def settings_hash(*parts: Any) -> str:
    """Return the hash of settings (dataclasses, mappings, sequences, plain values)."""
    return hashlib.sha256(to_json(parts).encode()).hexdigest()[:DIGITS]


def to_json(value: Any) -> str:
    """Return settings as JSON with sorted keys; the same settings give the same text."""
    return json.dumps(value, sort_keys=True, default=_plain)


def _plain(value: Any) -> Any:
    if is_dataclass(value) and not isinstance(value, type):
        return asdict(value)
    if isinstance(value, Mapping):
        return dict(value)
    raise TypeError(f"cannot be written as JSON: {value!r}")


@lru_cache(maxsize=64)
def code_hash(*modules: str) -> str:
    """Return the hash of package modules and everything in the package that they import.

    Parameters
    ----------
    *modules : str
        Dotted names, e.g. ``fogline.sampling``.

    Returns
    -------
    str
    """
    digest = hashlib.sha256()
    for path in sorted(import_closure(modules)):
        digest.update(path.relative_to(PACKAGE_ROOT).as_posix().encode())
        digest.update(path.read_bytes())
    return digest.hexdigest()[:DIGITS]


def import_closure(modules: tuple[str, ...]) -> set[Path]:
    """Return the source files of modules and of all package modules that they import.

    Parameters
    ----------
    modules : tuple of str
        Dotted names.

    Raises
    ------
    ValueError
        Where a name is no module of the package.
    """
    missing = [name for name in modules if _source(name) is None]
    if missing:
        raise ValueError(f"no module of the package: {', '.join(missing)}")
    found: set[Path] = set()
    waiting = list(modules)
    while waiting:
        path = _source(waiting.pop())
        if path is not None and path not in found:
            found.add(path)
            waiting.extend(_imports(path))
    return found


def _source(module: str) -> Path | None:
    base = PACKAGE_ROOT.joinpath(*module.split(".")[1:])
    candidates = (base.with_suffix(".py"), base / "__init__.py")
    return next((path for path in candidates if path.is_file()), None)


@lru_cache(maxsize=256)
def _imports(path: Path) -> tuple[str, ...]:
    names = []
    for module, inside, plain in _IMPORT.findall(path.read_text(encoding="utf-8")):
        # `from fogline.x import y` may name a module y or something inside x.
        parts = re.findall(r"\w+", inside)
        names += [module, *(f"{module}.{part}" for part in parts)] if module else [plain]
    return tuple(names)
