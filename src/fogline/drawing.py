"""Figures of an analysis, and the comparison of analyses, from files to files."""

from __future__ import annotations

import json
from collections.abc import Sequence
from pathlib import Path

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

from fogline.chains import EnsembleResult
from fogline.changes import changes, read_previous
from fogline.combining import replicate_rng
from fogline.comparison import EVIDENCE, compare
from fogline.deriving import make_draws
from fogline.faults import Fault, InputError
from fogline.figures import FIGURES, FigureInputs, draw_comparison, save
from fogline.figures.comparison import draw_changes
from fogline.figures.overlays import draw_overlays
from fogline.headlines import headline_draws
from fogline.posterior_file import read_coordinates, read_draws
from fogline.response_file import Fit, load_fit
from fogline.tables import read_table, write_table
from fogline.trust.differences import Influence, difference_sigma, influence_of

Array = NDArray[np.float64]

PRIOR_DRAWS = 4000
DIFFERENCE_DRAWS = 6000


def draw_figures(
    fit: Fit,
    *,
    posterior: str | Path,
    convergence: str | Path,
    tables: Sequence[str],
    ensembles: Sequence[str],
    directory: str | Path,
) -> None:
    """Draw every figure of an analysis, each as PDF and PNG.

    Parameters
    ----------
    fit : Fit
    posterior, convergence : path-like
        ``posterior.nc`` and ``convergence.json``.
    tables, ensembles : sequence of str
        Files of the tables and of the ensembles.
    directory : path-like
        Folder of the figures.
    """
    inputs = FigureInputs(
        fit=fit,
        tables={Path(path).stem: read_table(path) for path in tables},
        theta=read_draws(posterior, fit.analysis.derive.draws),
        prior_theta=prior_draws(fit),
        convergence=json.loads(Path(convergence).read_text(encoding="utf-8")),
        ensembles=[EnsembleResult.load(Path(path)) for path in ensembles],
    )
    for name, draw in FIGURES.items():
        save(draw(inputs), Path(directory) / name)


def prior_draws(fit: Fit) -> Array:
    """Return draws from the prior, shape (`PRIOR_DRAWS`, n_parameters)."""
    prior = fit.prior
    return prior.to_parameters(replicate_rng(fit).standard_normal((PRIOR_DRAWS, prior.n_dim)))


def write_comparison(
    analyses: Sequence[str],
    tables: Sequence[str],
    convergence: Sequence[str],
    responses: Sequence[str],
    posteriors: Sequence[str],
    *,
    overlays: Sequence[str],
    table: str | Path,
    figures: str | Path,
) -> None:
    """Compare the derived quantities of analyses with those of the first.

    Parameters
    ----------
    analyses : sequence of str
        The first is the reference.
    tables : sequence of str
        Files ``<analysis>/tables/<name>.ecsv`` of all analyses.
    convergence : sequence of str
        Files ``<analysis>/convergence.json``.
    responses, posteriors : sequence of str
        Files ``<analysis>/response.h5`` and ``<analysis>/posterior.nc``, in the order of the
        analyses.
    overlays : sequence of str
        Quantities of the overlays, ``table/curve``.
    table : path-like
        Table to write.
    figures : path-like
        Folder of the figures ``shifts`` and ``overlays``.
    """
    by_analysis = _by_analysis(analyses, tables)
    reports = {
        Path(path).parent.name: json.loads(Path(path).read_text(encoding="utf-8"))["evidence"]
        for path in convergence
    }
    evidences = {name: (report["ln_z"], report["error"]) for name, report in reports.items()}
    found = [
        _influence(response, posterior)
        for response, posterior in zip(responses, posteriors, strict=True)
    ]
    differences = {
        name: difference_sigma(found[0], other) for name, other in zip(analyses, found, strict=True)
    }
    shifts = compare(by_analysis, evidences, differences)
    write_table(shifts, table)
    save(draw_comparison(shifts[shifts["quantity"] != EVIDENCE]), Path(figures) / "shifts")
    save(draw_overlays(by_analysis, overlays), Path(figures) / "overlays")


def write_changes(
    analyses: Sequence[str],
    tables: Sequence[str],
    previous: str | Path,
    *,
    table: str | Path,
    figure: str | Path,
) -> None:
    """Compare the derived quantities of analyses with those of a previous results folder.

    Parameters
    ----------
    analyses : sequence of str
    tables : sequence of str
        Files ``<analysis>/tables/<name>.ecsv`` of all analyses.
    previous : path-like
        Folder that holds the same.
    table, figure : path-like
        ECSV file; figure without suffix.

    Raises
    ------
    InputError
        Where the folder has no derived tables of any of the analyses.
    """
    now = _by_analysis(analyses, tables)
    names = tuple(dict.fromkeys(Path(path).stem for path in tables))
    before = {name: read_previous(previous, name, names) for name in analyses}
    found = changes(before, now)
    if not len(found):
        what = f"compare_with is '{previous}', which has no derived tables of these analyses"
        raise InputError([Fault("config", 1, what)])
    write_table(found, table)
    save(draw_changes(found), figure)


def _by_analysis(analyses: Sequence[str], tables: Sequence[str]) -> dict[str, dict[str, Table]]:
    found: dict[str, dict[str, Table]] = {name: {} for name in analyses}
    for path in map(Path, tables):
        found[path.parent.parent.name][path.stem] = read_table(path)
    return found


def _influence(response: str, posterior: str) -> Influence:
    """Return what moves the headline quantities of an analysis."""
    fit = load_fit(response)
    theta, x = (
        read_draws(posterior, DIFFERENCE_DRAWS),
        read_coordinates(posterior, DIFFERENCE_DRAWS),
    )
    headlines = headline_draws(make_draws(theta, fit.setting, fit.analysis))
    return influence_of(fit, x, theta, headlines)
