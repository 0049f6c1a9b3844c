"""Hold-outs and pairwise fits of an analysis, gathered into tables."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from astropy.table import Table

from fogline.tables import write_whole
from fogline.trust.hold_outs import level_of, sigma_level
from fogline.trust.weights import GOOD_K

NOT_CONVERGED = "not converged"
TENSION = "tension"

Found = Mapping[str, Any]


def save_found(found: Found, path: str | Path) -> None:
    """Write what one job found as JSON, whole or not at all."""
    text = json.dumps(found, indent=1)
    write_whole(path, lambda temporary: temporary.write_text(text + "\n", encoding="utf-8"))


def load_found(path: str | Path) -> dict[str, Any]:
    """Read what `save_found` wrote."""
    return dict(json.loads(Path(path).read_text(encoding="utf-8")))


def tension_table(hold_outs: Sequence[Found], false_alarm: float) -> Table:
    """Return one line a hold-out, the worst first.

    Parameters
    ----------
    hold_outs : sequence of mapping
        From `fogline.trust.hold_outs.hold_out`.
    false_alarm : float
        Chance that consistent data raise any flag in the table.
    """
    level = level_of(false_alarm, len(hold_outs))
    ordered = sorted(hold_outs, key=lambda found: float(found["p_value"]))
    table = Table(
        {
            "group": np.array([f["group"] for f in ordered], dtype="U64"),
            "datasets": np.array([" ".join(f["datasets"]) for f in ordered], dtype="U256"),
            "how": np.array([f["how"] for f in ordered], dtype="U12"),
            **{
                name: np.array([f[name] for f in ordered], dtype=kind)
                for name, kind in (
                    ("pareto_k", float),
                    ("n_rows", int),
                    ("discrepancy", float),
                    ("p_value", float),
                    ("sigma", float),
                    ("offset", float),
                    ("extrapolated", bool),
                    ("converged", bool),
                )
            },
            "flag": np.array([_flag(f, level) for f in ordered], dtype="U16"),
        }
    )
    table.meta["definition"] = (
        "A data set (or group) against what all others predict for it. discrepancy: chi^2-like, "
        "with the scatter and correlation of replicated data, uncertainty of the fit included; "
        "p_value: chance that consistent data are farther out (extrapolated: from a gamma tail); "
        "sigma: its normal equivalent; offset: common offset of the rows in sigma, positive where "
        "data lie above. how: reweighted where the joint posterior could stand for the fit without "
        f"(pareto_k < {GOOD_K}), else refitted. Flagged below p = {level:.2g}, {false_alarm:g} "
        "shared out among the rows of this table. Who is right in a tension the table cannot say: "
        "each of two data sets that disagree is at odds with the other."
    )
    table.meta["sigma_level"] = sigma_level(false_alarm, len(hold_outs))
    return table


def _flag(found: Found, level: float) -> str:
    if not found["converged"]:
        return NOT_CONVERGED
    return TENSION if float(found["p_value"]) < level else ""


def shift_table(hold_outs: Sequence[Found]) -> Table:
    """Return how every headline quantity moves without each group.

    Parameters
    ----------
    hold_outs : sequence of mapping
    """
    names = ("median", "sigma", "median_without", "sigma_without", "shift_sigma")
    rows = [(f["group"], shift) for f in hold_outs for shift in f["shifts"]]
    table = Table(
        {
            "group": np.array([group for group, _ in rows], dtype="U64"),
            "quantity": np.array([shift["quantity"] for _, shift in rows], dtype="U64"),
            **{
                name: np.array([shift[name] for _, shift in rows], dtype=float)
                for name in ("z", *names)
            },
        }
    )
    table.meta["definition"] = (
        "median, sigma (half the 68% width): all data; median_without, sigma_without: without the "
        "group. shift_sigma: (median - median_without) over the error of that difference, root of "
        "sigma_without^2 - sigma^2, since both fits share all other data (first order); NaN where "
        "the group hardly changes the error. Units are those of the derived tables."
    )
    return table


def pairwise_table(alone: Sequence[Found]) -> Table:
    """Return every kind against the fit of every other kind alone.

    Parameters
    ----------
    alone : sequence of mapping
        From `fogline.trust.hold_outs.fit_alone`.
    """
    rows = [(f["fitted"], f["converged"], against) for f in alone for against in f["against"]]
    table = Table(
        {
            "fitted": np.array([fitted for fitted, _, _ in rows], dtype="U64"),
            "predicted": np.array([a["predicted"] for _, _, a in rows], dtype="U64"),
            **{
                name: np.array([a[name] for _, _, a in rows], dtype=kind)
                for name, kind in (
                    ("n_rows", int),
                    ("discrepancy", float),
                    ("p_value", float),
                    ("sigma", float),
                    ("offset", float),
                    ("extrapolated", bool),
                )
            },
            "converged": np.array([converged for _, converged, _ in rows], dtype=bool),
        }
    )
    table.meta["definition"] = (
        "fitted: the kind whose data sets were fitted alone; predicted: the kind held against that "
        "fit. Columns as in the table tension. A kind that constrains little predicts little: its "
        "row is quiet whatever the others say."
    )
    return table
