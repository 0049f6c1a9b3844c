"""What can be wrong with a set of ensembles; each check gives its findings in words.

A check returns a list of sentences, empty where all is well. Any one of them alone makes the
verdict of `fogline.convergence` false.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from itertools import combinations
from typing import Final

import numpy as np
from numpy.typing import NDArray

from fogline.chains import EnsembleResult
from fogline.diagnostics import autocorrelation_times
from fogline.evidence import Evidence, combine_evidence
from fogline.stopping import MAX_GROWTH, MIN_TIMES
from fogline.stuck import stuck_walkers

Array = NDArray[np.float64]
Table = Sequence[tuple[int, float]]

DISAGREEMENT: Final = 4.0
"""Difference of two estimates, in units of its Monte Carlo error, that is no accident: about one
in 10^4 for each pair that is compared."""

MEANINGFUL: Final = 0.1
"""Difference of means, in posterior standard deviations, and of widths, relative, that matters."""

MEANINGFUL_EVIDENCE: Final = 0.05
"""Difference of ln Z that matters."""

MAX_PARETO_K: Final = 0.7
"""Shape of the weights' tail above which importance sampling fails (Vehtari et al. 2024)."""

MIN_EFFICIENCY: Final = 1e-3
"""Efficiency below which a handful of draws decide the evidence."""


def step_limit(results: Sequence[EnsembleResult]) -> list[str]:
    """Find ensembles that ended without meeting their own target."""
    return [f"{_name(r)}: {r.reason}" for r in results if not r.stopped]


def stuck(results: Sequence[EnsembleResult]) -> list[str]:
    """Find walkers that hardly move, rest too long, or stay far out in ln posterior."""
    return [
        f"{_name(r)}: {walkers.sum()} of {len(walkers)} walkers {what} (first: {walkers.argmax()})"
        for r in results
        for what, walkers in stuck_walkers(r.chain, r.ln_prob).items()
        if walkers.any()
    ]


def chain_lengths(results: Sequence[EnsembleResult], tables: Sequence[Table]) -> list[str]:
    """Find chains too short for their autocorrelation time, or for which it still grows."""
    findings = []
    for result, table in zip(results, tables, strict=True):
        steps, tau = table[-1]
        if not steps >= MIN_TIMES * tau:
            times = steps / tau
            findings.append(
                f"{_name(result)}: the chain is only {times:.0f} autocorrelation times long, "
                f"at least {MIN_TIMES:.0f} are needed"
            )
        if len(table) < 2 or not tau <= MAX_GROWTH * table[-2][1]:
            trail = " → ".join(f"{t:.0f}" for _, t in table)
            findings.append(
                f"{_name(result)}: the autocorrelation time still grows with the chain ({trail} "
                "steps): the chain is too short to tell it"
            )
    return findings


def disagreeing_ensembles(results: Sequence[EnsembleResult], names: Sequence[str]) -> list[str]:
    """Find pairs of ensembles whose means or widths differ beyond Monte Carlo error."""
    moments = [chain_moments(r) for r in results]
    findings = []
    for (a, left), (b, right) in combinations(zip(results, moments, strict=True), 2):
        findings += _differences(f"{_name(a)} and {_name(b)}", left, right, names)
    return findings


def chain_against_weights(results: Sequence[EnsembleResult], names: Sequence[str]) -> list[str]:
    """Find chains whose means or widths differ from those of the importance weights.

    The weights know nothing of the chain: this finds a sampler that converged to something else
    than the posterior. Where the weights are bad they are no judge.
    """
    findings = []
    for result in results:
        if not trusted(result.importance.pareto_k, result.importance.efficiency):
            continue
        w = result.importance
        weighted = (w.mean, w.sd, w.mean_error, w.sd_error)
        who = f"{_name(result)} and its own importance weights"
        findings += _differences(who, chain_moments(result), weighted, names)
    return findings


Moments = tuple[Array, Array, Array, Array]


def chain_moments(result: EnsembleResult) -> Moments:
    """Return means, widths, the means' errors and the widths' relative errors, each (n_dim,)."""
    x = result.samples
    tau = np.maximum(autocorrelation_times(result.chain), 1.0)
    size = np.maximum(len(x) / tau, 1.0)
    sd = x.std(axis=0)
    with np.errstate(invalid="ignore", divide="ignore"):
        kurtosis = ((x - x.mean(axis=0)) ** 4).mean(axis=0) / sd**4
    # var(s^2) = s^4 (kurtosis - 1) / n, so that s itself has half its relative error.
    return x.mean(axis=0), sd, sd / np.sqrt(size), 0.5 * np.sqrt((kurtosis - 1.0) / size)


def _differences(who: str, left: Moments, right: Moments, names: Sequence[str]) -> list[str]:
    sd = 0.5 * (left[1] + right[1])
    with np.errstate(invalid="ignore", divide="ignore"):
        shift = np.abs(left[0] - right[0]) / sd
        shift_error = np.hypot(left[2], right[2]) / sd
        ratio = np.abs(np.log(left[1] / right[1]))
        ratio_error = np.hypot(left[3], right[3])
    findings = []
    for value, error, text in (
        (shift, shift_error, "{who} disagree: means of {name} differ by {value:.2f} σ"),
        (ratio, ratio_error, "{who} disagree: widths of {name} differ by {value:.0%}"),
    ):
        # Negated, so that a comparison with NaN is a finding.
        wrong = ~((value <= MEANINGFUL) | (value <= DISAGREEMENT * error))
        if wrong.any():
            worst = int(np.where(wrong, np.nan_to_num(value, nan=np.inf), -1.0).argmax())
            text = text.format(who=who, name=names[worst], value=value[worst])
            more = f" (and {wrong.sum() - 1} more parameters)" if wrong.sum() > 1 else ""
            findings.append(f"{text}, Monte Carlo error {error[worst]:.3f}{more}")
    return findings


def trusted(pareto_k: float, efficiency: float) -> bool:
    """Return whether importance weights may be believed."""
    return pareto_k <= MAX_PARETO_K and efficiency >= MIN_EFFICIENCY


def bad_evidence(results: Sequence[EnsembleResult]) -> list[str]:
    """Find importance weights that can't be trusted, and evidences that differ."""
    evidence = combine_evidence([r.importance for r in results])
    checks: tuple[Callable[[Evidence], list[str]], ...] = (_bad_weights, _evidences_differ)
    return [text for check in checks for text in check(evidence)]


def _bad_weights(evidence: Evidence) -> list[str]:
    findings = []
    if not evidence.pareto_k <= MAX_PARETO_K:
        findings.append(
            f"the evidence is not trustworthy: Pareto k of the importance weights is "
            f"{evidence.pareto_k:.2f}, allowed {MAX_PARETO_K}"
        )
    if not evidence.efficiency >= MIN_EFFICIENCY:
        findings.append(
            f"the evidence is not trustworthy: efficiency of the importance weights is "
            f"{evidence.efficiency:.2%}, at least {MIN_EFFICIENCY:.1%} is needed"
        )
    return findings


def _evidences_differ(evidence: Evidence) -> list[str]:
    if evidence.disagreement <= DISAGREEMENT or evidence.difference <= MEANINGFUL_EVIDENCE:
        return []
    return [
        f"the ensembles' evidences disagree: ln Z differs by {evidence.difference:.2f}, "
        f"{evidence.disagreement:.1f} times its error"
    ]


def _name(result: EnsembleResult) -> str:
    return f"ensemble {result.index}"
