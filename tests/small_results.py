"""Result files of an analysis that never ran, for tests of what reads them."""

import json
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from astropy.table import Table
from matplotlib.figure import Figure

from fogline.summary_figures import CAPTIONS
from fogline.tables import write_table

CONFIG = {
    "name": "toy",
    "datasets": ["data/counts.ecsv", "data/paths.ecsv"],
    "checks": {"false_alarm": 0.05},
    "derive": {"helium_factor": 1.3},
    "model": {"prior": {"slope_kind": "walk", "slope_step": {"dist": "norm", "scale": 0.5}}},
    "sampler": {"max_steps": 20000, "warm_up": [600, 300], "components": [4, 8]},
}
Z = np.array([2.0, 2.5, 3.5, 4.5])
COLOUR = "#ff00ff"
"""Of every figure: nothing else on a page has it."""


@dataclass
class SmallResults:
    """What the files say; each field may be changed before `write`."""

    converged: bool = True
    reasons: list[str] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    z_data: tuple[float, float, float] = (2.0, 3.0, 4.6)
    row_flags: tuple[str, str, str] = ("", "", "")
    pareto_k: tuple[float, float, float] = (0.1, 0.2, 0.3)
    test_flags: tuple[str, str] = ("", "")
    dataset_flags: dict[str, str] = field(default_factory=lambda: {"counts": "", "paths": ""})
    information: list[tuple[str, float, float, float]] = field(
        default_factory=lambda: [
            ("log_f[15.0]", 2.5, 0.1, 0.1),
            ("rho_hi", 2.5, 0.1, -0.2),
            ("scale[counts]", np.nan, 0.99, 0.9),
        ]
    )
    share_by_column: tuple[float, ...] = (0.1, 0.2, 0.1, 0.2, 0.1)
    unit_depth: tuple[tuple[float, float, float], ...] = (
        (500.0, 400.0, 700.0),
        (200.2, 181.7, 222.7),
        (57.77, 55.84, 59.85),
        (23.34, 22.03, 24.73),
    )
    tension: list[tuple[str, str, float, float, str]] | None = field(
        default_factory=lambda: [
            ("counts", "counts", 0.3, 1.0, ""),
            ("paths", "paths", 0.09, 1.7, ""),
        ]
    )
    tension_fingerprint: str = "f00d"

    def write(self, folder: Path) -> Path:
        """Write the files; return the folder."""
        for name, table in self.tables().items():
            path = folder / "tables" / f"{name}.ecsv"
            write_table(
                table, path, analysis="toy", fogline_version="1.2", config=json.dumps(CONFIG)
            )
        (folder / "convergence.json").write_text(json.dumps(self.convergence()))
        (folder / "figures").mkdir()
        for name in CAPTIONS:
            figure = Figure(figsize=(3.0, 2.0), facecolor=COLOUR)
            figure.savefig(folder / "figures" / f"{name}.png", dpi=100)
        return folder

    def convergence(self) -> dict[str, Any]:
        """Return the convergence report."""
        parameter = {"name": "log_f[15.0]", "rhat": 1.0021, "ess_bulk": 5000.0, "ess_tail": 4100.0}
        return {
            "converged": self.converged,
            "reasons": self.reasons,
            "notes": self.notes,
            "parameters": [parameter, parameter | {"rhat": 1.001}],
            "ensembles": [{}, {}],
        }

    def tables(self) -> dict[str, Table]:
        """Return every table that a summary reads."""
        predictive = Table(
            {
                "dataset": ["counts", "counts", "paths"],
                "row": [0, 1, 0],
                "z": list(self.z_data),
                "pareto_k": list(self.pareto_k),
                "flag": list(self.row_flags),
            },
            meta={
                "fingerprint": "f00d",
                "datasets": {
                    name: {"p_value": 0.4321, "flag": flag, "quantity": "lls_incidence"}
                    for name, flag in self.dataset_flags.items()
                },
            },
        )
        discrepancies = Table(
            {
                "dataset": ["counts", "paths"],
                "test": ["trend", "offset"],
                "sigma": [4.2, 0.4],
                "flag": list(self.test_flags),
            }
        )
        names = ("quantity", "z", "share_prior", "prior_sensitivity")
        found = {
            "predictive": predictive,
            "discrepancies": discrepancies,
            "information": Table(rows=self.information, names=names),
            "information_by_column": Table(
                {
                    "log_nhi": 12.0 + 0.1 * np.arange(len(self.share_by_column)),
                    "share_prior": list(self.share_by_column),
                }
            ),
            "constraints": Table(
                {
                    "dataset": ["counts", "paths", "prior"],
                    "n_rows": [2, 1, 0],
                    "n_constrained": [1.75, 0.5, 0.75],
                }
            ),
            "hi_density": _bands(rho_hi=1.5e8, omega_hi=1.1e-3),
            "mean_free_path": _bands(local=50.0),
            "incidence": _bands(lx_dla=0.07, lx_lls_tau2=0.4),
            "lya_opacity": _bands(**{"": 0.6}),
        }
        names = ("median", "lo68", "hi68")
        for name, column in zip(names, zip(*self.unit_depth, strict=True), strict=True):
            found["mean_free_path"][f"unit_depth_{name}"] = column
        found = {name: Table(columns) for name, columns in found.items()}
        found["predictive"].meta = predictive.meta
        found["hi_density"].meta["note"] = "33% of the variance of rho_hi is the prior's"
        if self.tension is not None:
            rows = [
                (group, sets, "reweighted", p, sigma, 0.5, True, flag)
                for group, sets, p, sigma, flag in self.tension
            ]
            names = ("group", "datasets", "how", "p_value", "sigma", "offset", "converged", "flag")
            meta = {"fingerprint": self.tension_fingerprint}
            found["tension"] = Table(rows=rows, names=names, meta=meta)
        return found


def _bands(**medians: float) -> dict[str, Any]:
    """Return bands that widen by 10% to either side, the same at every redshift."""
    columns: dict[str, Any] = {"z": Z}
    for name, median in medians.items():
        prefix = f"{name}_" if name else ""
        for band, factor in (("median", 1.0), ("lo68", 0.91), ("hi68", 1.1)):
            columns[prefix + band] = np.full(len(Z), factor * median)
    return columns
