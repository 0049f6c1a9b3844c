"""What the Snakefile knows before any job runs: study, names of tables and figures, last words.

Imported at every start of the workflow, so that nothing here pulls in numpy, scipy or astropy; the
names are checked against the registries by a test.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any, Final

from fogline.config import parse_config
from fogline.linked_files import header_meta
from fogline.provenance import file_hash, settings_hash
from fogline.settings import AnalysisSettings, Study
from fogline.yaml_lines import read_yaml

DERIVED: Final = (
    "column_distribution",
    "incidence",
    "hi_density",
    "lya_opacity",
    "mean_free_path",
    "opacity_budget",
    "transmission",
    "sightline_scatter",
    "escape_correction",
    "opacity_classes",
    "depth_path",
    "ionizing_background",
    "breakthrough",
)
"""Names of the derived tables, in the order of `fogline.derived.DERIVED_TABLES`."""

CHECKS: Final = (
    "predictive",
    "discrepancies",
    "information",
    "information_by_column",
    "constraints",
)
"""Tables that `fogline.trust.checking` writes for every analysis."""

TENSION_TABLES: Final = ("tension", "hold_out_shifts", "pairwise")
TENSION_FIGURES: Final = ("tension", "hold_out_shifts")
"""What `fogline.trust.tension` writes on request."""

EXPORTS: Final = (
    "column_distribution_samples.ecsv",
    "column_distribution_samples.fits",
    "transmission.ecsv",
    "opacity_grid.ecsv",
    "parameters.tex",
)
"""Files that `fogline.exports` writes."""

FIGURES: Final = (
    "column_distribution",
    "lya_opacity",
    "lls_incidence",
    "mean_free_path",
    "hi_density",
    "opacity_budget",
    "transmission",
    "escape_correction",
    "depth_path",
    "ionizing_background",
    "corner",
    "pulls",
    "misfit",
    "information",
    "convergence",
    "prior_posterior",
)
"""Names of the figures, in the order of `fogline.figures.FIGURES`."""


def hold_out_groups(analysis: AnalysisSettings) -> dict[str, tuple[str, ...]]:
    """Return what hold-outs leave out: every data set alone, and the config's groups.

    Parameters
    ----------
    analysis : AnalysisSettings

    Returns
    -------
    dict
        Data sets by the name of the group.
    """
    stems = [Path(path).stem for path in analysis.datasets]
    return {stem: (stem,) for stem in stems} | dict(analysis.checks.groups)


def kinds_of(analysis: AnalysisSettings) -> dict[str, tuple[str, ...]]:
    """Return the data sets of every quantity, as the headers of their files say.

    Parameters
    ----------
    analysis : AnalysisSettings
    """
    kinds: dict[str, tuple[str, ...]] = {}
    for path in analysis.datasets:
        quantity = str(header_meta(path).get("quantity", "unknown"))
        kinds[quantity] = (*kinds.get(quantity, ()), Path(path).stem)
    return kinds


def read_study(config: Mapping[str, Any], files: Sequence[str | Path]) -> Study:
    """Return the study of a merged config, faults placed in the last file that it came from.

    Parameters
    ----------
    config : mapping
        As the workflow merged it from files and command line.
    files : sequence of path-like
        The config files.

    Raises
    ------
    InputError
        With every fault.
    """
    if not files:
        return parse_config(config, "config")
    document = read_yaml(files[-1])
    return parse_config(config, str(files[-1]), document.line)


def closing_words(analyses: Sequence[str], results: str | Path = "results") -> str:
    """Return the verdict of every analysis and the page to read first.

    Parameters
    ----------
    analyses : sequence of str
    results : path-like
        Folder of the results.
    """
    lines = []
    for name in analyses:
        folder = Path(results) / name
        path, page = folder / "convergence.json", folder / "summary.html"
        # A run for a single file need not have come to the verdict.
        if not path.exists():
            continue
        report = json.loads(path.read_text(encoding="utf-8"))
        state = "converged" if report["converged"] else "NOT CONVERGED"
        lines.append(f"{name}: {state}; see {page if page.exists() else f'{folder}/'}")
        lines += [f"  {reason}" for reason in report["reasons"]]
    return "\n".join(lines)


def hold_outs_hash(analysis: str, results: str | Path = "results") -> str:
    """Return the hash of what hold-outs left of an analysis; empty where they were not run.

    As a parameter of a rule it makes what shows the hold-outs again when they change. As an input
    they would be made whenever the data change, which only their own target should do.

    Parameters
    ----------
    analysis : str
    results : path-like
        Folder of the results.
    """
    folder = Path(results) / analysis
    paths = [folder / "tables/tension.ecsv", folder / "figures/tension.png"]
    found = [file_hash(path) for path in paths if path.is_file()]
    return settings_hash(*found) if found else ""
