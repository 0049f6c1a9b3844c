"""Write constraints.txt: every dependency, direct and indirect, for each supported Python.

For each Python the package is installed with its `dev` extra into a fresh environment and what pip
chose is written down; where the Pythons differ, a line carries a marker. Run it from the top of
the project: `python .ci/pin.py [PYTHON ...]`, with the interpreters to use (default: python3.11,
python3.12, python3.13 of the PATH).
"""

import subprocess
import sys
import tempfile
from collections import defaultdict
from pathlib import Path

SUPPORTED = ("3.11", "3.12", "3.13")


def frozen(python: str) -> tuple[str, dict[str, str]]:
    """Return a Python's version and the pins that pip chooses for it."""
    with tempfile.TemporaryDirectory() as folder:
        subprocess.run([python, "-m", "venv", folder], check=True)
        inside = Path(folder) / "bin" / "python"
        pip = [inside, "-m", "pip"]
        subprocess.run([*pip, "install", "-q", ".[dev]"], check=True)
        lines = subprocess.run(
            [*pip, "freeze", "--exclude", "fogline"], check=True, capture_output=True, text=True
        ).stdout.splitlines()
        code = "import sys; print('%d.%d' % sys.version_info[:2])"
        version = subprocess.run([inside, "-c", code], check=True, capture_output=True, text=True)
    return version.stdout.strip(), dict(line.split("==") for line in lines if "==" in line)


def merged(pins: dict[str, dict[str, str]]) -> str:
    """Return the constraints of all Pythons, with markers where they differ."""
    chosen: dict[tuple[str, str], list[str]] = defaultdict(list)
    for python, packages in pins.items():
        for name, version in packages.items():
            chosen[name.lower(), version].append(python)
    lines = []
    for (name, version), pythons in sorted(chosen.items()):
        marker = " or ".join(f'python_version == "{p}"' for p in pythons)
        everywhere = len(pythons) == len(pins)
        lines.append(f"{name}=={version}" + ("" if everywhere else f" ; {marker}"))
    head = f"# Pins of everything, for Python {', '.join(pins)}; made by .ci/pin.py.\n"
    return head + "\n".join(lines) + "\n"


if __name__ == "__main__":
    interpreters = sys.argv[1:] or [f"python{version}" for version in SUPPORTED]
    Path("constraints.txt").write_text(merged(dict(map(frozen, interpreters))), encoding="utf-8")
