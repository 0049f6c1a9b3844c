"""Misfit beyond single rows: scatter, trend, offset and largest pull of every data set.

All are made of the scores u_i of `fogline.trust.leave_one_out`, which are standard normal where the
model and the stated errors hold:

* ``scatter``: Σ u², two-sided against χ²;
* ``trend``: Σ u (z - z̄) / √Σ (z - z̄)², two-sided normal: residuals that run with redshift;
* ``offset``: Σ u / √n, two-sided normal: most rows on one side;
* ``largest``: the largest |u| of n.

Each row is predicted by data that share the others' noise, so that scores of one data set are
slightly correlated; the rate of false alarms is measured in ``tests/statistical``. What a whole
data set has in common, a wrong calibration, say, is left in by its other rows: that is what
hold-outs of the data set are for (`fogline.trust.hold_outs`).

The chance that consistent data raise any flag in the table is `false_alarm`: half of it is shared
out among rows, half among the tests of data sets.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray
from scipy.special import chdtr, chdtrc, ndtr, ndtri

from fogline.datasets import DataSet
from fogline.trust.leave_one_out import LeaveOneOut
from fogline.trust.weights import GOOD_K

Array = NDArray[np.float64]

TESTS: Final = ("scatter", "trend", "offset", "largest")

ROUND_OFF: Final = 1e-9
"""Redshifts of a data set that differ by less are one: it has no trend."""


@dataclass(frozen=True)
class Discrepancy:
    """One test of one data set.

    Parameters
    ----------
    dataset, test : str
    value : float
        Of the statistic; a sign is that of data minus prediction.
    p_value : float
    """

    dataset: str
    test: str
    value: float
    p_value: float

    @property
    def sigma(self) -> float:
        """Normal equivalent of a two-sided p-value."""
        return sigma_of(self.p_value)


def sigma_of(p_value: float) -> float:
    """Return how many σ of a normal have a two-sided p-value."""
    return float(-ndtri(0.5 * np.clip(p_value, 1e-300, 1.0)))


def discrepancies(datasets: Sequence[DataSet], loo: LeaveOneOut) -> list[Discrepancy]:
    """Return every test of every data set that has rows for it.

    Parameters
    ----------
    datasets : sequence of DataSet
        In the order of the rows.
    loo : LeaveOneOut
    """
    found, end = [], 0
    for data in datasets:
        start, end = end, end + data.n_rows
        # A limit is no draw from a distribution: it can be at odds on one side only.
        rows = np.flatnonzero(data.visible & (data.limit == 0))
        score = loo.score[start:end][rows]
        found += [
            Discrepancy(data.name, test, value, p)
            for test, (value, p) in _tests(score, data.z[rows]).items()
        ]
    return found


def _tests(score: Array, z: Array) -> dict[str, tuple[float, float]]:
    n = len(score)
    if n == 0:
        return {}
    squares = float(score @ score)
    tail = min(chdtr(n, squares), chdtrc(n, squares))
    largest = float(score[np.argmax(np.abs(score))])
    offset = float(score.sum() / np.sqrt(n))
    tests = {
        "scatter": (squares, float(min(1.0, 2.0 * tail))),
        "largest": (largest, float(-np.expm1(n * np.log1p(-two_sided(largest))))),
    }
    if n > 1:
        tests["offset"] = (offset, two_sided(offset))
    arm = z - z.mean()
    if n > 2 and np.ptp(z) > ROUND_OFF:
        trend = float(score @ arm / np.sqrt(arm @ arm))
        tests["trend"] = (trend, two_sided(trend))
    return {test: tests[test] for test in TESTS if test in tests}


def two_sided(score: float) -> float:
    """Return the two-sided p-value of a normal score, below 1."""
    return float(min(2.0 * ndtr(-abs(score)), 1.0 - 1e-15))


def row_level(n_rows: int, false_alarm: float) -> float:
    """Return the p-value below which a row is flagged."""
    return float(-np.expm1(np.log1p(-0.5 * false_alarm) / max(n_rows, 1)))


def discrepancy_table(found: Sequence[Discrepancy], false_alarm: float) -> Table:
    """Return one line a test, worst first.

    Parameters
    ----------
    found : sequence of Discrepancy
    false_alarm : float
        Chance that consistent data raise any flag, here and among the rows.
    """
    level = row_level(len(found), false_alarm)
    ordered = sorted(found, key=lambda d: d.p_value)
    table = Table(
        {
            "dataset": np.array([d.dataset for d in ordered], dtype="U64"),
            "test": np.array([d.test for d in ordered], dtype="U16"),
            "value": np.array([d.value for d in ordered], dtype=float),
            "p_value": np.array([d.p_value for d in ordered], dtype=float),
            "sigma": np.array([d.sigma for d in ordered], dtype=float),
            "flag": np.array(["misfit" if d.p_value < level else "" for d in ordered], dtype="U8"),
        }
    )
    table.meta["definition"] = (
        "From scores u = normal quantile of the leave-one-out PIT of every row (limits left out). "
        "scatter: sum u^2 against chi^2 (two-sided); trend: correlation of u with redshift; "
        "offset: sum u / sqrt(n); largest: u farthest from 0. sigma: normal equivalent of the p-"
        f"value. Flagged below p = {level:.2g}: with the rows of the predictive table, consistent "
        f"data raise a flag anywhere with a chance of {false_alarm:g}. What a data set's rows have "
        "in common, such as a wrong calibration, hold-outs show, not this table."
    )
    return table


def unreliable(loo: LeaveOneOut) -> NDArray[np.bool_]:
    """Return rows whose weights can't be trusted, shape (n_rows,)."""
    return np.asarray(loo.pareto_k >= GOOD_K)
