"""Whether independent samplers say the same of one posterior.

Every sampler gives draws in blocks that are (nearly) independent: groups of walkers of several
ensembles, whole tempered populations, random parts of a nested run. A quantile's Monte Carlo error
is the standard error of its values in the blocks. Samplers are compared with the ensembles that the
results come from, in units of the joint error, and of the posterior's own width: a difference may
be significant and of no consequence, or the reverse.

No sampler is the judge by name. One whose own runs disagree with each other by more than their
errors says nothing of the others; the table says so in its ``usable`` column.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Any, Final

import numpy as np
from astropy.table import Table
from numpy.typing import NDArray
from scipy.special import stdtrit

Array = NDArray[np.float64]

QUANTILES: Final = (0.025, 0.16, 0.5, 0.84, 0.975)
REFERENCE: Final = "ensembles"
FALSE_ALARM: Final = 0.01
"""Chance that two runs of one right sampler are found to disagree."""

LEAST_ERROR: Final = 0.01
"""Least error of ln Z that is reckoned with: the sampling path is in single precision."""


@dataclass(frozen=True)
class Sample:
    """What a sampler found.

    Parameters
    ----------
    blocks : tuple of ndarray, each (n, n_quantities)
        Independent parts of its draws, at least two.
    ln_z, ln_z_error : float
    """

    blocks: tuple[Array, ...]
    ln_z: float
    ln_z_error: float

    def quantiles(self) -> tuple[Array, Array]:
        """Return quantiles and their errors, each (len(QUANTILES), n_quantities)."""
        whole = np.quantile(np.concatenate(self.blocks), QUANTILES, axis=0)
        parts = np.stack([np.quantile(block, QUANTILES, axis=0) for block in self.blocks])
        with np.errstate(invalid="ignore"):
            error = parts.std(axis=0, ddof=1) / np.sqrt(len(parts))
        return whole, error


@dataclass(frozen=True)
class Verdict:
    """Whether two runs agree.

    Parameters
    ----------
    agree : bool
    worst : float
        Largest difference of a quantile in joint errors.
    allowed : float
        What that may be.
    quantity : str
        Where it is.
    ln_z : float
        Difference of ln Z in joint errors.
    """

    agree: bool
    worst: float
    allowed: float
    quantity: str
    ln_z: float


def compare_runs(first: Sample, second: Sample, names: Sequence[str]) -> Verdict:
    """Say whether two samples are of one distribution, by quantiles and evidence.

    Parameters
    ----------
    first, second : Sample
    names : sequence of str
        Quantities.
    """
    difference = _difference(first, second)
    n_tests = difference.size + 1
    n_blocks = min(len(first.blocks), len(second.blocks))
    # Errors come from few blocks: Student's t, shared out among all tests.
    allowed = float(-stdtrit(n_blocks - 1.0, 0.5 * FALSE_ALARM / n_tests))
    finite = np.where(np.isfinite(difference), np.abs(difference), 0.0)
    where = np.unravel_index(int(finite.argmax()), finite.shape)
    error = max(np.hypot(first.ln_z_error, second.ln_z_error), LEAST_ERROR)
    ln_z = (second.ln_z - first.ln_z) / error
    worst = float(finite[where])
    agree = bool(worst < allowed and abs(ln_z) < allowed)
    return Verdict(agree, worst, allowed, names[int(where[1])], float(ln_z))


def _difference(first: Sample, second: Sample) -> Array:
    (q1, e1), (q2, e2) = first.quantiles(), second.quantiles()
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray((q2 - q1) / np.hypot(e1, e2))


def agreement_table(runs: Mapping[str, Sequence[Sample]], names: Sequence[str]) -> Table:
    """Return quantiles and evidence of every sampler beside those of the ensembles.

    Parameters
    ----------
    runs : mapping of str to sequence of Sample
        Runs of every sampler; `REFERENCE` is among them.
    names : sequence of str
        Quantities.

    Returns
    -------
    astropy.table.Table
        ``sampler, run, quantity, quantile, value, error, difference_errors, difference_sigma,
        usable``; ln Z in rows of the quantity ``ln_evidence`` without a quantile.
    """
    reference = runs[REFERENCE][0]
    middle, error = reference.quantiles()
    width = 0.5 * (middle[3] - middle[1])
    inner = {sampler: _own_verdict(several, names) for sampler, several in runs.items()}
    rows: list[tuple[Any, ...]] = []
    for sampler, several in runs.items():
        usable = inner[sampler] is None or inner[sampler].agree  # type: ignore[union-attr]
        for number, sample in enumerate(several):
            values, errors = sample.quantiles()
            with np.errstate(invalid="ignore", divide="ignore"):
                in_errors = (values - middle) / np.hypot(errors, error)
                in_sigma = (values - middle) / width
            for (i, j), value in np.ndenumerate(values):
                numbers = (value, errors[i, j], in_errors[i, j], in_sigma[i, j])
                rows.append((sampler, number, names[j], QUANTILES[i], *numbers, usable))
            joint = max(np.hypot(sample.ln_z_error, reference.ln_z_error), LEAST_ERROR)
            shift = (sample.ln_z - reference.ln_z) / joint
            nan = float("nan")
            evidence = (sample.ln_z, sample.ln_z_error, shift, nan)
            rows.append((sampler, number, "ln_evidence", nan, *evidence, usable))
    columns = ("sampler", "run", "quantity", "quantile", "value", "error")
    table = Table(
        rows=rows,
        names=(*columns, "difference_errors", "difference_sigma", "usable"),
        dtype=("U16", int, "U64", float, float, float, float, float, bool),
    )
    table.meta["definition"] = (
        "Quantiles of one posterior by independent samplers. error: Monte Carlo error, from "
        f"independent blocks of draws. difference_errors: value minus that of {REFERENCE} in joint "
        "Monte Carlo errors; difference_sigma: the same in half the 68% width of the posterior. "
        "usable: false for a sampler whose own runs disagree with each other: it judges nothing."
    )
    table.meta["verdicts"] = verdicts(runs, names)
    return table


def _own_verdict(several: Sequence[Sample], names: Sequence[str]) -> Verdict | None:
    """Return the worst verdict on two runs of one sampler; None where it ran once."""
    pairs = [compare_runs(a, b, names) for a, b in combinations(several, 2)]
    return min(pairs, key=lambda v: (v.agree, -v.worst)) if pairs else None


def verdicts(runs: Mapping[str, Sequence[Sample]], names: Sequence[str]) -> list[str]:
    """Return in words who agrees with whom, and who may not judge."""
    lines = []
    reference = runs[REFERENCE][0]
    for sampler, several in runs.items():
        own = _own_verdict(several, names)
        if own is not None and not own.agree:
            lines.append(
                f"{sampler}: its own runs disagree ({own.quantity}: {own.worst:.1f} joint errors, "
                f"{own.allowed:.1f} allowed; ln Z: {own.ln_z:.1f}): it judges nothing"
            )
            continue
        if sampler == REFERENCE:
            continue
        found = [compare_runs(reference, sample, names) for sample in several]
        worst = min(found, key=lambda v: (v.agree, -v.worst))
        word = "agrees with" if worst.agree else "DISAGREES with"
        lines.append(
            f"{sampler} {word} {REFERENCE}: worst {worst.quantity}, {worst.worst:.1f} joint errors "
            f"({worst.allowed:.1f} allowed); ln Z: {worst.ln_z:.1f}"
        )
    return lines
