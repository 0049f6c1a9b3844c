"""Families of analyses: alternative pivots and priors for the same data, from files to files."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Final

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray

from fogline.deriving import make_draws
from fogline.figures import save
from fogline.figures.family import draw_family
from fogline.headlines import headline_draws
from fogline.posterior_file import read_draws
from fogline.response_file import Fit, load_fit
from fogline.tables import write_table
from fogline.trust.leave_one_out import LeaveOneOut, leave_one_out
from fogline.trust.stacking import combine, evidence_weights, stacking_weights
from fogline.trust.weights import GOOD_K

Array = NDArray[np.float64]

DRAWS: Final = 4000
COLUMN_STEP: Final = 0.1
SEED: Final = 1_000_171
MIXTURES: Final = ("stacked", "evidence", "equal")
BANDS: Final = ("median", "lo68", "hi68", "lo95", "hi95")


@dataclass(frozen=True)
class Member:
    """One analysis of a family.

    Parameters
    ----------
    name : str
    loo : LeaveOneOut
    ln_z, ln_z_error : float
    values : ndarray, shape (n_draws, n_quantities)
        Headline quantities, then log f along the family's columns.
    """

    name: str
    loo: LeaveOneOut
    ln_z: float
    ln_z_error: float
    values: Array


def write_family(
    family: str,
    names: Sequence[str],
    responses: Sequence[str | Path],
    posteriors: Sequence[str | Path],
    convergence: Sequence[str | Path],
    *,
    tables: str | Path,
    figure: str | Path,
) -> None:
    """Weigh and combine the members of a family.

    Parameters
    ----------
    family : str
    names : sequence of str
        Its analyses.
    responses, posteriors, convergence : sequence of path-like
        Their files, in order.
    tables : path-like
        Folder of ``weights.ecsv`` and ``combined.ecsv``.
    figure : path-like
        Figure without suffix.
    """
    fits = [load_fit(path) for path in responses]
    grid, z = _common_columns(fits)
    keys = [("", 0.0)]
    members = []
    for name, fit, posterior, report in zip(names, fits, posteriors, convergence, strict=True):
        keys, member = _member(name, fit, posterior, report, grid, z)
        members.append(member)
    weights = weights_table(members)
    combined = combined_table(members, keys, np.asarray(weights["weight_stacking"]), weights)
    meta = {"family": family, "analyses": list(names)}
    write_table(weights, Path(tables) / "weights.ecsv", **meta)
    write_table(combined, Path(tables) / "combined.ecsv", **meta)
    save(draw_family(combined, weights), figure)


def _common_columns(fits: Sequence[Fit]) -> tuple[Array, float]:
    """Return the columns that all members reach, and the redshift of log f."""
    ranges = [fit.setting.column_range for fit in fits]
    lo, hi = max(r[0] for r in ranges), min(r[1] for r in ranges)
    grid = np.linspace(lo, hi, 1 + round((hi - lo) / COLUMN_STEP))
    return grid, float(fits[0].analysis.derive.column_redshifts[0])


def _member(
    name: str, fit: Fit, posterior: str | Path, report: str | Path, grid: Array, z: float
) -> tuple[list[tuple[str, float]], Member]:
    theta = read_draws(posterior, DRAWS)
    headlines = headline_draws(make_draws(theta, fit.setting, fit.analysis))
    log_f = fit.setting.distribution.log_f(theta, grid, z)
    evidence = json.loads(Path(report).read_text(encoding="utf-8"))["evidence"]
    # The same seed for all: the same counts are randomised alike.
    loo = leave_one_out(fit.response, theta, np.random.default_rng(SEED))
    keys = list(zip(headlines.quantities, map(float, headlines.z), strict=True))
    keys += [(f"log_f({column:.4g})", z) for column in grid]
    values = np.concatenate([headlines.values, log_f], axis=1)
    return keys, Member(name, loo, float(evidence["ln_z"]), float(evidence["error"]), values)


def weights_table(members: Sequence[Member]) -> Table:
    """Return one line a member: predictive density, evidence, weights.

    Parameters
    ----------
    members : sequence of Member
        Of the same data.
    """
    ln_p = np.stack([member.loo.ln_p for member in members], axis=1)
    elpd = ln_p.sum(axis=0)
    best = int(np.argmax(elpd))
    difference = ln_p - ln_p[:, [best]]
    table = Table({"analysis": np.array([member.name for member in members], dtype="U64")})
    table["elpd"] = elpd
    table["elpd_difference"] = difference.sum(axis=0)
    table["elpd_difference_error"] = np.sqrt(len(ln_p) * difference.var(axis=0))
    table["n_bad_weights"] = [_n_bad(member.loo) for member in members]
    table["ln_evidence"] = [member.ln_z for member in members]
    table["ln_evidence_error"] = [member.ln_z_error for member in members]
    table["weight_stacking"] = stacking_weights(ln_p)
    found = evidence_weights(
        np.array([m.ln_z for m in members]),
        np.array([m.ln_z_error for m in members]),
        np.random.default_rng(SEED),
    )
    for name, column in zip(("", "_lo68", "_hi68"), found, strict=True):
        table[f"weight_evidence{name}"] = column
    table.meta["definition"] = (
        "elpd: sum of ln leave-one-out predictive densities; its difference from the best member, "
        "with standard error; n_bad_weights: rows whose leave-one-out weights can't be trusted. "
        "weight_stacking: of the mixture that predicts best; weight_evidence: proportional to the "
        "evidence, which leans on the width of priors. Members have the same data."
    )
    return table


def _n_bad(loo: LeaveOneOut) -> int:
    """Return how many rows, or whole lists, have weights that can't be trusted."""
    # Only the first row of a list carries its density.
    return int(((loo.pareto_k >= GOOD_K) & (loo.ln_p != 0.0)).sum())


def combined_table(
    members: Sequence[Member], keys: Sequence[tuple[str, float]], stacked: Array, weights: Table
) -> Table:
    """Return the bands of every member and of both mixtures, one line a quantity.

    Parameters
    ----------
    members : sequence of Member
    keys : sequence of (str, float)
        Quantity and redshift of every column of the members' values.
    stacked : ndarray, shape (n_members,)
        Stacking weights.
    weights : astropy.table.Table
        From `weights_table`.
    """
    table = Table({"quantity": np.array([q for q, _ in keys], dtype="U64")})
    table["z"] = [z for _, z in keys]
    for member in members:
        for name, q in zip(BANDS, (0.5, 0.16, 0.84, 0.025, 0.975), strict=True):
            values = np.quantile(member.values, q, axis=0, method="inverted_cdf")
            table[f"{member.name}_{name}"] = values
    equal = np.full(len(members), 1.0 / len(members))
    by_evidence = np.asarray(weights["weight_evidence"])
    for mixture, weight in zip(MIXTURES, (stacked, by_evidence, equal), strict=True):
        found = [combine([m.values[:, i] for m in members], weight) for i in range(len(keys))]
        for number, name in enumerate(BANDS):
            table[f"{mixture}_{name}"] = [c.bands[number] for c in found]
        table[f"{mixture}_choice_share"] = [c.choice_share for c in found]
    table.meta["definition"] = (
        "Bands of every member, and of the mixtures by stacking weights, by evidence, and with "
        "equal weights. Few rows tell models apart: where the first two lean on one member, the "
        "last says what the others would have changed. "
        "choice_share: part of the mixture's variance that lies between members: how much of the "
        "error bar is choice of pivots and priors. log_f(N): log10 f along columns. Units are "
        "those of the derived tables."
    )
    return table
