"""Fail unless every analysis of the shipped config has converged and left every file."""

import json
import sys
from pathlib import Path

from fogline.plan import CHECKS, DERIVED, EXPORTS, FIGURES

faults = []
analyses = sorted(p.parent for p in Path("results").glob("*/convergence.json"))
for folder in analyses:
    report = json.loads((folder / "convergence.json").read_text())
    faults += [f"{folder}: {reason}" for reason in report["reasons"]]
    expected = [
        folder / "figures" / f"{name}.{form}" for name in FIGURES for form in ("pdf", "png")
    ]
    tables = ("parameters", *DERIVED, *CHECKS)
    expected += [folder / "tables" / f"{name}.ecsv" for name in tables]
    expected += [folder / "exports" / name for name in EXPORTS]
    expected += [folder / name for name in ("posterior.nc", "summary.html", "summary.md")]
    faults += [f"missing or empty: {p}" for p in expected if not (p.exists() and p.stat().st_size)]
if len(analyses) < 3:
    faults.append(f"only {len(analyses)} analyses have a verdict")
print("\n".join(faults) or f"{len(analyses)} analyses, every file there, every verdict good")
sys.exit(bool(faults))
