"""The verdict of an analysis in five lines, and what to do next.

Converged? Consistent? What does the prior make? What are the numbers? What next? Every answer is
taken from the convergence report and from tables of `fogline.trust`, with their own thresholds.
Text between backticks is code; pages render it as such.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Final

import numpy as np
from astropy.table import Row, Table

MOST_PRIOR: Final = 0.5
"""Share of the squared error from which on the prior makes a quantity."""

MOST_SENSITIVE: Final = 0.3
"""Shift, in σ, of a mean when the power of the prior doubles, from which on the prior matters."""

GOOD_K: Final = 0.7
"""Pareto k from which on leave-one-out numbers can't be trusted (Vehtari et al. 2024)."""

HOLD_OUTS: Final = "snakemake --cores all hold_outs"
"""Command that leaves data sets out."""

GOOD: Final = "good"
MIND: Final = "mind"
BAD: Final = "bad"
PLAIN: Final = "plain"

_OWN: Final = ("scale[", "scatter[")
"""Beginnings of the names of data sets' own parameters, which their priors may well make."""

_REMEDIES: Final = {
    "scatter": "stated errors or covariances of the file (`student_dof`, `scatter` in its meta)",
    "trend": "redshift breaks of the exponents (`evolution.breaks`) or a drift of the data",
    "offset": "its calibration (`scale` in its meta or in `nuisances`)",
    "largest": "its worst row",
}
"""What each test of `fogline.trust.discrepancies` hints at."""


@dataclass(frozen=True)
class Line:
    """One line of the verdict.

    Parameters
    ----------
    question, answer, text : str
        The answer is a word or two, the text one or more sentences.
    state : str
        `GOOD`, `MIND`, `BAD` or `PLAIN`.
    """

    question: str
    answer: str
    text: str
    state: str


@dataclass(frozen=True)
class Step:
    """Something to do next.

    Parameters
    ----------
    title, text : str
    """

    title: str
    text: str


@dataclass(frozen=True)
class Evidence:
    """Everything that the verdict is made from.

    Parameters
    ----------
    convergence : mapping
        Content of ``convergence.json``.
    config : mapping
        Settings of the analysis, as the meta of every table carries them.
    predictive, discrepancies, information, by_column, constraints : astropy.table.Table
    tension : astropy.table.Table or None
        None where no data set was left out.
    """

    convergence: Mapping[str, Any]
    config: Mapping[str, Any]
    predictive: Table
    discrepancies: Table
    information: Table
    by_column: Table
    constraints: Table
    tension: Table | None

    @cached_property
    def flagged_rows(self) -> list[Row]:
        """Rows of the data that the fit without them does not reproduce."""
        return [row for row in self.predictive if is_flagged(row)]

    @cached_property
    def flagged_tests(self) -> list[Row]:
        """Tests of data sets that failed."""
        return [row for row in self.discrepancies if is_flagged(row)]

    @cached_property
    def odd_datasets(self) -> dict[str, str]:
        """What is flagged of the scatter of whole data sets, by their names."""
        found = self.predictive.meta["datasets"].items()
        return {name: str(summary["flag"]) for name, summary in found if summary["flag"]}

    @cached_property
    def worst_tension(self) -> Row | None:
        """Hold-out with the smallest p-value."""
        if self.tension is None or len(self.tension) == 0:
            return None
        return self.tension[int(np.argmin(np.asarray(self.tension["p_value"], float)))]

    @cached_property
    def flagged_tension(self) -> list[Row]:
        """Hold-outs in tension."""
        return [row for row in self.tension if is_flagged(row)] if self.tension is not None else []

    @cached_property
    def stale_tension(self) -> bool:
        """Whether the hold-outs belong to other data or another model."""
        if self.tension is None:
            return False
        return bool(self.tension.meta.get("fingerprint") != self.predictive.meta.get("fingerprint"))

    @cached_property
    def data_redshifts(self) -> tuple[float, float]:
        """Lowest and highest redshift of the data."""
        z = np.asarray(self.predictive["z"], float)
        return float(z.min()), float(z.max())

    @cached_property
    def prior_driven(self) -> dict[tuple[str, float], str]:
        """What the prior makes: reason by quantity and redshift (NaN becomes 0)."""
        found: dict[tuple[str, float], str] = {}
        for row in self.information:
            quantity = str(row["quantity"])
            share, shift = float(row["share_prior"]), float(row["prior_sensitivity"])
            reasons = []
            if share > MOST_PRIOR:
                reasons.append(f"{share:.0%} of its squared error is the prior's")
            if abs(shift) > MOST_SENSITIVE:
                reasons.append(f"moves {abs(shift):.1f}σ when the prior's power doubles")
            if reasons and not quantity.startswith(_OWN):
                z = float(np.nan_to_num(float(row["z"]), nan=0.0))
                # log f at a column is listed as a pivot and as a headline: once is enough.
                found.setdefault((_same_name(quantity), z), ", ".join(reasons))
        return found

    @cached_property
    def prior_ranges(self) -> str:
        """Columns at which the prior makes log f, in words; empty where none."""
        columns = np.asarray(self.by_column["log_nhi"], float)
        driven = np.asarray(self.by_column["share_prior"], float) > MOST_PRIOR
        return "log N = " + ", ".join(ranges) if (ranges := _runs(columns, driven)) else ""


def is_flagged(row: Row) -> bool:
    """Return whether a row's cell ``flag`` says anything.

    An empty cell comes back from a file as a masked one.
    """
    return row["flag"] is not np.ma.masked and str(row["flag"]) not in ("", "--")


def verdict_lines(evidence: Evidence, numbers: str, steps: tuple[Step, ...]) -> tuple[Line, ...]:
    """Return the five lines of the verdict.

    Parameters
    ----------
    evidence : Evidence
    numbers : str
        The main numbers in a sentence.
    steps : tuple of Step
        Those of `next_steps`.
    """
    step = steps[0]
    more = f" Then: {'; '.join(s.title.lower() for s in steps[1:])}." if len(steps) > 1 else ""
    return (
        _converged(evidence),
        _consistent(evidence),
        _prior(evidence),
        _quoted(evidence, numbers),
        Line("What next?", step.title, step.text + more, PLAIN),
    )


def _converged(evidence: Evidence) -> Line:
    report = evidence.convergence
    question = "Converged?"
    if not report["converged"]:
        reasons = list(report["reasons"])
        first = reasons[0] if reasons else "no reason was recorded"
        more = f" ({len(reasons) - 1} more in `convergence.json`)" if len(reasons) > 1 else ""
        return Line(question, "No", f"Quote nothing. {_sentence(first)}{more}", BAD)
    parameters = report["parameters"]
    rhat = max(p["rhat"] for p in parameters)
    least = min(min(p["ess_bulk"], p["ess_tail"]) for p in parameters)
    text = (
        f"{len(report['ensembles'])} ensembles, {len(parameters)} parameters: largest R-hat "
        f"{rhat:.4f}, fewest effective samples {least:.0f}."
    )
    notes = [_sentence(note) for note in report["notes"]]
    return Line(question, "Yes", " ".join([text, *notes]), MIND if notes else GOOD)


def _consistent(evidence: Evidence) -> Line:
    rows, tests = evidence.flagged_rows, evidence.flagged_tests
    chance = float(evidence.config["checks"]["false_alarm"])
    counted = f"{len(evidence.predictive)} rows and {len(evidence.discrepancies)} tests"
    n_flags = len(rows) + len(tests)
    names = sorted({str(row["dataset"]) for row in (*rows, *tests)})
    text = (
        f"{n_flags} {'flag' if n_flags == 1 else 'flags'} among {counted}, in {_list(names)}"
        if n_flags
        else f"No flag among {counted}"
    )
    text += f"; consistent data raise any flag with a chance of {chance:.0%}."
    for name, flag in evidence.odd_datasets.items():
        text += f" The scatter of `{name}` is {flag.removeprefix('scatter ')} as a whole."
    weak = int(np.count_nonzero(np.asarray(evidence.predictive["pareto_k"], float) >= GOOD_K))
    if weak:
        some = "1 row is" if weak == 1 else f"{weak} rows are"
        text += f" {some} judged by weights that can't be trusted (Pareto k ≥ {GOOD_K:g})."
    text += f" {_tension(evidence)}"
    if n_flags or evidence.flagged_tension:
        return Line("Consistent?", "No", text, BAD)
    unsure = bool(evidence.odd_datasets) or evidence.worst_tension is None
    unsure = unsure or evidence.stale_tension
    return Line(
        "Consistent?", "As far as tested" if unsure else "Yes", text, MIND if unsure else GOOD
    )


def _tension(evidence: Evidence) -> str:
    worst = evidence.worst_tension
    if worst is None:
        return f"Hold-outs were not run; `{HOLD_OUTS}` predicts every data set from all others."
    count = len(evidence.flagged_tension)
    found = f"{count} flagged" if count else "none flagged"
    text = (
        f"Of {len(evidence.tension or ())} hold-outs {found}; worst is `{worst['group']}`: p = "
        f"{float(worst['p_value']):.2g} ({float(worst['sigma']):.1f}σ), common offset "
        f"{float(worst['offset']):+.1f}σ, {worst['how']}."
    )
    if "converged" in worst.colnames and not all(worst.table["converged"]):
        text += " Some of their own fits have not converged."
    if evidence.stale_tension:
        text += f" They are of an earlier fit; run `{HOLD_OUTS}` again."
    return text


def _prior(evidence: Evidence) -> Line:
    constraints = evidence.constraints
    fixed = np.asarray(constraints["n_constrained"], float)
    is_prior = np.array([str(name) == "prior" for name in constraints["dataset"]])
    data, prior = float(fixed[~is_prior].sum()), float(fixed[is_prior].sum())
    counted = f"Data fix {data:.1f} of {data + prior:.0f} parameters, the prior {prior:.1f}."
    driven = [
        f"{_with_redshift(quantity, z)} ({why})"
        for (quantity, z), why in evidence.prior_driven.items()
    ]
    ranges = evidence.prior_ranges
    question = "Prior-driven?"
    if not driven and not ranges:
        text = "No pivot, exponent, headline quantity or range of columns is the prior's."
        return Line(question, "No", f"{counted} {text}", GOOD)
    text = f" {'; '.join(driven)}." if driven else ""
    if ranges:
        text += f" The prior makes most of the error of log f at {ranges}."
    return Line(question, "In part", counted + text, MIND)


def _quoted(evidence: Evidence, numbers: str) -> Line:
    if evidence.convergence["converged"]:
        return Line("What to quote?", "Median and central 68%", numbers, PLAIN)
    return Line("What to quote?", "Nothing yet", f"For orientation only. {numbers}", BAD)


def next_steps(evidence: Evidence) -> tuple[Step, ...]:
    """Return what to do next, the most urgent first; at least one step.

    Parameters
    ----------
    evidence : Evidence
    """
    if not evidence.convergence["converged"]:
        return (Step("Sample better", _sampling(evidence)),)
    steps = [*_flag_steps(evidence), *_prior_steps(evidence)]
    if evidence.worst_tension is None or evidence.stale_tension:
        steps.append(
            Step("Run the hold-outs", f"`{HOLD_OUTS}`, then `snakemake --cores all` for this page.")
        )
    if not steps:
        text = "See `results/comparison/` for what moves between analyses; add one without a kind "
        text += "of data (`base`, `exclude`) for each conclusion that you want to quote."
        steps.append(Step("Compare analyses", text))
    return tuple(steps)


def _sampling(evidence: Evidence) -> str:
    sampler = evidence.config["sampler"]
    reasons = " ".join(evidence.convergence["reasons"]).lower()
    keys = []
    if any(word in reasons for word in ("limit", "r-hat", "sample size", "autocorrelation")):
        keys.append("max_steps")
    if any(word in reasons for word in ("stuck", "walkers", "disagree", "weights", "evidence")):
        keys += ["warm_up", "components"]
    now = [f"`sampler.{key}` (now {sampler[key]})" for key in keys or ["max_steps", "warm_up"]]
    return (
        f"Raise {_and(now)} in the config; look at `figures/convergence` for which parameters "
        "lag, and give those that data leave free a tighter prior or fewer pivots."
    )


def _flag_steps(evidence: Evidence) -> Iterator[Step]:
    tests, rows = evidence.flagged_tests, evidence.flagged_rows
    if tests or rows:
        names = sorted({str(row["dataset"]) for row in (*tests, *rows)})
        text = f"`figures/misfit` and `figures/pulls`: {_list(names)}."
        for row in tests:
            text += f" {row['test']} of `{row['dataset']}`: check {_REMEDIES[str(row['test'])]}."
        yield Step("Look at the flagged data", text)
    if evidence.flagged_tension:
        worst = str(evidence.flagged_tension[0]["datasets"]).split()
        paths = evidence.config["datasets"]
        files = [p for p in paths if p.rsplit("/", 1)[-1].removesuffix(".ecsv") in worst]
        yield Step(
            "Weigh the tension",
            f"`figures/tension`; compare with an analysis of `base: {evidence.config['name']}` and "
            f"`exclude: [{', '.join(files or worst)}]`. Each of two data sets that disagree is at "
            "odds with the other: which is right the table can't say.",
        )
    if evidence.odd_datasets:
        text = f"`figures/pulls`: scatter of {_list(list(evidence.odd_datasets))} against its "
        yield Step("Check stated errors", text + "stated errors.")


def _prior_steps(evidence: Evidence) -> Iterator[Step]:
    if not evidence.prior_driven and not evidence.prior_ranges:
        return
    step = evidence.config["model"]["prior"].get("slope_step") or {}
    change = "a wider `model.prior`"
    if "scale" in step:
        change = f"`model.prior.slope.step.scale: {2.0 * step['scale']:g}` (now {step['scale']:g})"
    yield Step(
        "Widen the prior",
        f"Compare with an analysis of `base: {evidence.config['name']}` and {change} in "
        "`results/comparison/`, and see `figures/prior_posterior` and `figures/information`: what "
        "moves is not measured.",
    )


def _same_name(quantity: str) -> str:
    """Return ``log_f[15]`` for ``log_f[15.0]``."""
    return quantity.removesuffix(".0]") + "]" if quantity.endswith(".0]") else quantity


def _with_redshift(quantity: str, z: float) -> str:
    return f"`{quantity}` at z = {z:g}" if z else f"`{quantity}`"


def _runs(columns: np.ndarray, chosen: np.ndarray) -> list[str]:
    """Return runs of neighbouring columns that are chosen, each as ``a to b``."""
    edges = np.flatnonzero(np.diff(np.concatenate([[False], chosen, [False]]).astype(int)))
    pairs = zip(edges[::2], edges[1::2] - 1, strict=True)
    return [
        f"{columns[a]:.1f} to {columns[b]:.1f}" if b > a else f"{columns[a]:.1f}" for a, b in pairs
    ]


def _list(names: list[str]) -> str:
    return _and([f"`{name}`" for name in names])


def _and(parts: list[str]) -> str:
    return f"{', '.join(parts[:-1])} and {parts[-1]}" if len(parts) > 1 else parts[0]


def _sentence(text: str) -> str:
    return text[:1].upper() + text[1:] + ("" if text.endswith(".") else ".")
