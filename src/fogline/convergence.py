"""The verdict over all ensembles of an analysis.

Converged means: independently started ensembles agree (rank-normalised split R-hat, means and
widths), bulk and tail effective sample sizes meet the target in every parameter, the
autocorrelation time has stopped growing with the chain and fits into it many times, no walker is
stuck, and importance weights, which know nothing of the chain, are well behaved and agree with
it. Each reason against is given in words.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fogline import convergence_checks as checks
from fogline.chains import EnsembleResult
from fogline.diagnostics import effective_sizes, growth, split_rhat
from fogline.evidence import Evidence, combine_evidence
from fogline.settings import SamplerSettings

Array = NDArray[np.float64]


@dataclass(frozen=True)
class ParameterConvergence:
    """Diagnostics of one parameter: rank-normalised split R-hat, effective sample sizes."""

    name: str
    rhat: float
    ess_bulk: float
    ess_tail: float


@dataclass(frozen=True)
class ConvergenceReport:
    """The verdict, its reasons, and the numbers behind it.

    Parameters
    ----------
    reasons : tuple of str
        What speaks against convergence; empty where nothing does.
    notes : tuple of str
        What a reader should know besides.
    parameters : tuple of ParameterConvergence
        In the order of the chain's last axis.
    growth : tuple
        Per ensemble, pairs of chain length and autocorrelation time [steps].
    evidence : Evidence
        From all ensembles.
    results : tuple of EnsembleResult
        What was judged.
    """

    reasons: tuple[str, ...]
    notes: tuple[str, ...]
    parameters: tuple[ParameterConvergence, ...]
    growth: tuple[tuple[tuple[int, float], ...], ...]
    evidence: Evidence
    results: tuple[EnsembleResult, ...]

    @property
    def converged(self) -> bool:
        """Whether nothing speaks against convergence."""
        return not self.reasons

    def as_dict(self) -> dict[str, Any]:
        """Return the report for JSON: plain numbers, None in place of what is not finite."""
        e = self.evidence
        report = {
            "converged": self.converged,
            "reasons": list(self.reasons),
            "notes": list(self.notes),
            "parameters": [vars(p) for p in self.parameters],
            "acceptance": self._acceptance(),
            "autocorrelation": [
                {"ensemble": r.index, "steps": [n for n, _ in g], "time": [t for _, t in g]}
                for r, g in zip(self.results, self.growth, strict=True)
            ],
            "evidence": {
                "ln_z": e.ln_z,
                "error": e.error,
                "efficiency": e.efficiency,
                "pareto_k": e.pareto_k,
            },
            "ensembles": [_ensemble_entry(r) for r in self.results],
        }
        return dict(_plain(report))

    def _acceptance(self) -> dict[str, float]:
        moves = sorted({move for r in self.results for move in r.acceptance})
        return {
            move: float(np.mean([r.acceptance[move] for r in self.results if move in r.acceptance]))
            for move in moves
        }


def assess(
    results: Sequence[EnsembleResult],
    settings: SamplerSettings,
    names: Sequence[str],
    *,
    coordinates: Sequence[str] | None = None,
    to_parameters: Callable[[Array], Array] | None = None,
) -> ConvergenceReport:
    """Judge the ensembles of one analysis together.

    Parameters
    ----------
    results : sequence of EnsembleResult
        At least one; with one only, independent starts are not compared, and a note says so.
    settings : SamplerSettings
        Targets.
    names : sequence of str
        Parameters, in order.
    coordinates : sequence of str, optional
        Names of the sampling coordinates, the chain's last axis; the parameters' where not given.
    to_parameters : callable, optional
        Map from coordinates, (n, n_dim), to parameters; the identity where not given. R-hat and
        effective sizes are those of the parameters, since they are what is reported.

    Returns
    -------
    ConvergenceReport
    """
    chains = aligned(results)
    coordinates = names if coordinates is None else coordinates
    if to_parameters is not None:
        chains = to_parameters(chains.reshape(-1, chains.shape[-1])).reshape(chains.shape)
    parameters = tuple(_diagnose(name, chains[..., k]) for k, name in enumerate(names))
    tables = tuple(tuple(growth(r.chain, r.thin)) for r in results)
    reasons = [
        *_high_rhat(parameters, settings.max_rhat),
        *_few_samples(parameters, settings.target_ess),
        *checks.step_limit(results),
        *checks.stuck(results),
        *checks.disagreeing_ensembles(results, coordinates),
        *checks.chain_lengths(results, tables),
        *checks.bad_evidence(results),
        *checks.chain_against_weights(results, coordinates),
    ]
    evidence = combine_evidence([r.importance for r in results])
    notes = _notes(results, evidence)
    return ConvergenceReport(
        tuple(reasons), tuple(notes), parameters, tables, evidence, tuple(results)
    )


def aligned(results: Sequence[EnsembleResult]) -> Array:
    """Return the ensembles' chains with one number of draws, spread evenly over each.

    Ensembles stop by themselves, so that a slow one is longer. Cutting it would throw away what it
    ran for; its draws lie further apart instead, as its autocorrelation time asks for anyway.

    Parameters
    ----------
    results : sequence of EnsembleResult
        At least one.

    Returns
    -------
    ndarray, shape (n_ensembles, n_stored, n_walkers, n_dim)
    """
    shortest = min(len(r.chain) for r in results)
    kept = [np.linspace(0, len(r.chain) - 1, shortest).round().astype(int) for r in results]
    return np.stack([r.chain[k] for r, k in zip(results, kept, strict=True)])


def _diagnose(name: str, x: Array) -> ParameterConvergence:
    """Return the diagnostics of one parameter, shape (n_ensembles, n_stored, n_walkers)."""
    bulk, tail = effective_sizes(np.concatenate(list(x), axis=1))
    return ParameterConvergence(name, split_rhat(list(x)), bulk, tail)


def _high_rhat(parameters: Sequence[ParameterConvergence], allowed: float) -> list[str]:
    bad = [p for p in parameters if not p.rhat < allowed]
    if not bad:
        return []
    worst = max(bad, key=lambda p: p.rhat)
    return [
        f"R-hat is not below {allowed:g} in {len(bad)} of {len(parameters)} parameters, "
        f"worst {worst.name}: {worst.rhat:.4f}"
    ]


def _few_samples(parameters: Sequence[ParameterConvergence], target: float) -> list[str]:
    findings = []
    for kind, sizes in (
        ("bulk", [p.ess_bulk for p in parameters]),
        ("tail", [p.ess_tail for p in parameters]),
    ):
        n_bad = sum(not size >= target for size in sizes)
        if n_bad:
            least = int(np.argmin(sizes))
            findings.append(
                f"{kind} effective sample size is below {target:g} in {n_bad} of "
                f"{len(sizes)} parameters, least {parameters[least].name}: {sizes[least]:.0f}"
            )
    return findings


def _notes(results: Sequence[EnsembleResult], evidence: Evidence) -> list[str]:
    notes = []
    if len(results) == 1:
        notes.append("one ensemble only: independent starts were not compared")
    if not evidence.error <= checks.MEANINGFUL_EVIDENCE:
        notes.append(f"the error of ln Z is {evidence.error:.3f}")
    return notes


def _ensemble_entry(result: EnsembleResult) -> dict[str, Any]:
    return {
        "ensemble": result.index,
        "seed": result.seed,
        "warm_up_steps": result.warm_up,
        "steps": result.steps,
        "thin": result.thin,
        "walkers": result.chain.shape[1],
        "ended": result.reason,
        "acceptance": result.acceptance,
        "least_walker_acceptance": float(result.walker_acceptance.min()),
        "ln_z": result.importance.ln_z,
        "ln_z_error": result.importance.error,
        "importance_draws": result.importance.n,
    }


def _plain(value: Any) -> Any:
    """Return the value in JSON's own types; what is not finite becomes None."""
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, float | np.floating):
        return float(value) if math.isfinite(value) else None
    return value
