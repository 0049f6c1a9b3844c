"""Hold-outs of an analysis, from files to files."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path

from fogline.figures import save
from fogline.figures.tension import draw_shifts, draw_tension
from fogline.posterior_file import read_draws
from fogline.response_file import Fit
from fogline.tables import write_table
from fogline.trust.hold_outs import fit_alone, hold_out
from fogline.trust.tension_tables import (
    load_found,
    pairwise_table,
    save_found,
    shift_table,
    tension_table,
)

DRAWS = 8000
"""Draws of the joint posterior that are reweighted."""


def write_hold_out(
    fit: Fit, posterior: str | Path, group: str, members: Sequence[str], output: str | Path
) -> None:
    """Leave out one group and write what is found.

    Parameters
    ----------
    fit : Fit
    posterior : path-like
        Posterior file.
    group : str
    members : sequence of str
        Its data sets.
    output : path-like
        JSON file.
    """
    save_found(hold_out(fit, read_draws(posterior, DRAWS), group, members), output)


def write_alone(
    fit: Fit, kinds: Mapping[str, Sequence[str]], kind: str, output: str | Path
) -> None:
    """Fit one kind alone and write what it says of the others; parameters as in `fit_alone`."""
    save_found(fit_alone(fit, kinds, kind), output)


def write_tension(
    fit: Fit,
    hold_outs: Sequence[str | Path],
    alone: Sequence[str | Path],
    *,
    tables: str | Path,
    figures: str | Path,
) -> None:
    """Gather what single jobs found into tables and figures.

    Parameters
    ----------
    fit : Fit
    hold_outs, alone : sequence of path-like
        JSON files of `write_hold_out` and `write_alone`.
    tables, figures : path-like
        Folders.
    """
    found = [load_found(path) for path in hold_outs]
    made = {
        "tension": tension_table(found, fit.analysis.checks.false_alarm),
        "hold_out_shifts": shift_table(found),
        "pairwise": pairwise_table([load_found(path) for path in alone]),
    }
    for name, table in made.items():
        write_table(table, Path(tables) / f"{name}.ecsv", **fit.table_meta())
    save(draw_tension(made["tension"], made["pairwise"]), Path(figures) / "tension")
    save(draw_shifts(made["hold_out_shifts"]), Path(figures) / "hold_out_shifts")
