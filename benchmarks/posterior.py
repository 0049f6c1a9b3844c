"""Speed of the posterior and its sampling: `python -m benchmarks.posterior [--json]`.

Measured on the shipped demo, each figure against its baseline, where it has one, in the same run:

``evaluation_speedup``  a straightforward evaluation (`benchmarks.straightforward`) over ours
``us_per_walker``       ours, microseconds, 256 walkers at once
``ess_per_s``           effective samples a second once warmed up, one core, slowest parameter
``ess_speedup``         the same over that of emcee's default move on the same posterior, from the
                        autocorrelation time of a long chain started inside the posterior; a lower
                        bound where that time was still growing (it says so)
``seconds_to_converged``  two ensembles on two cores, cold start to a good verdict, imports included
``evidence_z``          (ln Z − closed form) / error of a Gaussian problem of the same dimension
``peak_mb``             peak resident memory of a fit's process
"""

from __future__ import annotations

import argparse
import json
import multiprocessing
import os
import resource
import statistics
import sys
import time
from pathlib import Path
from typing import Any

import emcee
import numpy as np
from threadpoolctl import threadpool_limits

from benchmarks.straightforward import Straightforward
from fogline import build_fit, load_config, read_inputs, run_ensemble
from fogline.chains import EnsembleResult
from fogline.convergence import assess
from fogline.diagnostics import effective_sizes
from fogline.progress import Silent
from fogline.response_file import Fit

CONFIG = "config/config.yaml"
ANALYSIS = "joint"
DEFAULT_STEPS = 24_000
REPEATS = 30


def demo_fit() -> Fit:
    """Return the demo's joint analysis."""
    analysis = load_config(CONFIG).analyses[ANALYSIS]
    return build_fit(analysis, read_inputs(analysis))


def timed(function: Any, repeats: int) -> float:
    """Return the median time of a call [s]."""
    function()
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        function()
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def evaluation(fit: Fit, result: EnsembleResult) -> dict[str, Any]:
    """Compare the evaluation with the straightforward one, at draws of the posterior."""
    posterior, plain = fit.posterior, Straightforward(fit)
    x = result.chain[-1]
    theta = posterior.prior.to_parameters(x)
    gap = posterior.ln_likelihood(theta[:8]) - [plain.ln_likelihood(t) for t in theta[:8]]
    if np.abs(gap).max() > 1.0:
        raise RuntimeError(f"the two evaluations disagree by {gap} in ln likelihood")
    ours = timed(lambda: posterior.ln_prob(x), REPEATS) / len(x)
    slow = timed(lambda: plain.ln_likelihood(theta[0]), 5)
    return {
        "evaluation_speedup": slow / ours,
        "us_per_walker": 1e6 * ours,
        "straightforward_ms": 1e3 * slow,
    }


class Stopwatch(Silent):
    """Remembers when counted sampling began."""

    def __init__(self) -> None:
        self.began = time.perf_counter()

    def stage(self, name: str, n_steps: int) -> None:
        """Take the time of the latest stage."""
        self.began = time.perf_counter()


def sampling(fit: Fit) -> tuple[EnsembleResult, dict[str, float]]:
    """Sample one ensemble; return it and its effective samples a second once warmed up."""
    watch, posterior = Stopwatch(), fit.posterior
    result = run_ensemble(
        posterior.ln_prob, posterior.n_dim, fit.analysis.sampler, 0, progress=watch
    )
    seconds = time.perf_counter() - watch.began
    bulk = [effective_sizes(result.chain[..., k])[0] for k in range(posterior.n_dim)]
    return result, {"ess_per_s": min(bulk) / seconds, "autocorrelation": result.history[-1, 1]}


def default_move(fit: Fit, start: np.ndarray, n_steps: int) -> dict[str, Any]:
    """Sample with emcee's default move; return effective samples a second and its growth."""
    posterior = fit.posterior
    sampler = emcee.EnsembleSampler(*start.shape, posterior.ln_prob, vectorize=True)
    sampler.random_state = np.random.RandomState(1).get_state()
    begin = time.perf_counter()
    sampler.run_mcmc(start, n_steps, thin_by=1)
    seconds = time.perf_counter() - begin
    chain = sampler.get_chain()[:: max(1, n_steps // 4000)]
    thin = max(1, n_steps // 4000)
    growth = [
        float(thin * emcee.autocorr.integrated_time(chain[: len(chain) // k], tol=0).max())
        for k in (4, 2, 1)
    ]
    return {
        "default_ess_per_s": n_steps * start.shape[0] / growth[-1] / seconds,
        "default_autocorrelation_growth": growth,
        "default_still_growing": growth[-1] > 1.1 * growth[-2],
    }


def _one_ensemble(index: int) -> tuple[EnsembleResult, float]:
    fit = demo_fit()
    posterior = fit.posterior
    result = run_ensemble(posterior.ln_prob, posterior.n_dim, fit.analysis.sampler, index)
    return result, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0


def cold_start(fit: Fit) -> dict[str, Any]:
    """Run every ensemble in a process of its own, from nothing to the verdict."""
    begin = time.perf_counter()
    with multiprocessing.get_context("spawn").Pool(2) as pool:
        runs = pool.map(_one_ensemble, range(fit.analysis.sampler.ensembles), chunksize=1)
    prior = fit.posterior.prior
    report = assess(
        [result for result, _ in runs],
        fit.analysis.sampler,
        fit.response.distribution.names,
        coordinates=prior.coordinate_names,
        to_parameters=prior.to_parameters,
    )
    seconds = time.perf_counter() - begin
    return {
        "seconds_to_converged": seconds if report.converged else None,
        "bulk_ess": min(p.ess_bulk for p in report.parameters),
        "ln_z": report.evidence.ln_z,
        "ln_z_error": report.evidence.error,
        "peak_mb": max(megabytes for _, megabytes in runs),
    }


def evidence(fit: Fit) -> dict[str, float]:
    """Compare the evidence with its closed form for a Gaussian likelihood and unit normal prior."""
    n_dim = fit.posterior.n_dim
    scales = np.geomspace(0.05, 2.0, n_dim)
    rotation = np.linalg.qr(np.random.default_rng(3).standard_normal((n_dim, n_dim)))[0]

    def ln_prob(x: np.ndarray) -> np.ndarray:
        residual = (x @ rotation - 0.5) / scales
        ln_likelihood = -0.5 * np.sum(residual**2 + np.log(2.0 * np.pi * scales**2), axis=1)
        return ln_likelihood - 0.5 * np.sum(x**2 + np.log(2.0 * np.pi), axis=1)

    result = run_ensemble(ln_prob, n_dim, fit.analysis.sampler, 0)
    # The mean 0.5 of every rotated coordinate under N(0, 1 + scale^2).
    variance = 1.0 + scales**2
    exact = -0.5 * np.sum(0.25 / variance + np.log(2.0 * np.pi * variance))
    importance = result.importance
    return {
        "evidence_z": float((importance.ln_z - exact) / importance.error),
        "evidence_error": float(importance.error),
    }


def measure(default_steps: int) -> dict[str, Any]:
    """Return every figure."""
    fit = demo_fit()
    figures: dict[str, Any] = cold_start(fit)
    result, rates = sampling(fit)
    figures |= rates | evaluation(fit, result)
    figures |= default_move(fit, result.chain[-1], default_steps)
    figures["ess_speedup"] = figures["ess_per_s"] / figures["default_ess_per_s"]
    return figures | evidence(fit)


def main() -> None:
    """Print every figure."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--json", action="store_true", help="print JSON")
    parser.add_argument(
        "--default-steps",
        type=int,
        default=DEFAULT_STEPS,
        help="steps of emcee's default move (default: %(default)s)",
    )
    options = parser.parse_args()
    os.chdir(Path(__file__).resolve().parent.parent)
    # One core each: the jobs of the workflow run that way.
    with threadpool_limits(1):
        figures = measure(options.default_steps)
    if options.json:
        json.dump(figures, sys.stdout, indent=2)
        print()
        return
    for name, value in figures.items():
        print(f"{name:32s} {value:.4g}" if isinstance(value, float) else f"{name:32s} {value}")


if __name__ == "__main__":
    main()
