"""Calibration by simulation: truths drawn, data drawn from them, fits made, ranks taken.

*prior*: the truth is a draw of the prior, cut to where every prediction lies within a factor
`REACH` of its datum; the fit's prior is cut alike. A prior as wide as ours would else make data
that nobody could have (optical depths of 10^5 with errors of 0.02), and the test one of them.

*posterior*: "data like mine". The truth θ' is a draw of the joint posterior, y' data from it, and
the fit is that of both the original and the new data, p(θ | y, y'), for which θ' is a draw exactly
as in the prior's case with p(θ | y) in the prior's place.

Every fit is sampled as an analysis is (`fogline.ensemble`), with one ensemble and the lighter
settings of `sampler_of`; how many did not meet their target is counted and said. Its walkers begin
around the truth, itself a draw of the posterior: finding the place is not what ranks test
(independent starts of real fits do). Ranks are judged by `fogline.trust.ranks`.
"""

from __future__ import annotations

import json
import time
from collections.abc import Callable, Sequence
from dataclasses import asdict, dataclass, replace
from functools import cached_property
from pathlib import Path
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from fogline.datasets import DataSet
from fogline.deriving import make_draws
from fogline.distribution import LN10
from fogline.ensemble import run_ensemble
from fogline.figures import save
from fogline.figures.calibration import draw_calibration
from fogline.headlines import headline_draws
from fogline.posterior import Posterior
from fogline.quantities import QUANTITIES
from fogline.response import Response
from fogline.response_file import Fit
from fogline.settings import SamplerSettings
from fogline.tables import write_table, write_whole
from fogline.trust.ranks import rank_table
from fogline.trust.simulate import simulate
from fogline.walkers import WalkerResponse

Array = NDArray[np.float64]

MODES: Final = ("prior", "posterior")

STREAM: Final = 1_000_117
"""Spawn key of the random streams of replicates."""

JOINT_DRAWS: Final = 8000
"""Draws of the joint posterior that are truths of the mode `posterior`, at most."""

REACH: Final = 10.0
"""Factor within which the mode `prior` keeps all predictions of their data."""

AT_ONCE: Final = 2000
ATTEMPTS: Final = 500
"""Draws of the prior, and how often so many are made, for one truth within reach."""

WALKERS: Final = 128
TARGET_ESS: Final = 800
MAX_STEPS: Final = 6000
WARM_UP: Final = ((300, 4), (150, 6), (200, 8))
"""Steps and mixture components of the rounds of a replicate's warm-up."""


@dataclass(frozen=True)
class Replicate:
    """One simulated truth and what the fit of its data says of it.

    Parameters
    ----------
    index : int
    ranks : tuple of int
        Draws below the truth, for every quantity.
    met_target : bool
        Whether the ensemble met its target.
    seconds : float
    """

    index: int
    ranks: tuple[int, ...]
    met_target: bool
    seconds: float


def sampler_of(settings: SamplerSettings, n_dim: int, seed: int) -> SamplerSettings:
    """Return the settings with which a replicate is sampled."""
    steps, components = zip(*WARM_UP, strict=True)
    return replace(
        settings,
        walkers=max(WALKERS, 4 * n_dim),
        ensembles=1,
        seed=seed,
        target_ess=TARGET_ESS,
        max_steps=MAX_STEPS,
        warm_up=steps,
        components=components,
    )


def quantity_names(fit: Fit) -> tuple[str, ...]:
    """Return the names of what is ranked: parameters, then headline quantities."""
    theta = fit.prior.to_parameters(np.zeros((1, fit.prior.n_dim)))
    return (*fit.prior.names, *headline_draws(make_draws(theta, fit.setting, fit.analysis)).keys)


def calibrate(
    fit: Fit,
    mode: str,
    indices: Sequence[int],
    n_draws: int,
    joint: Array | None = None,
    alter: Callable[[tuple[DataSet, ...]], tuple[DataSet, ...]] | None = None,
) -> list[Replicate]:
    """Make replicates.

    Parameters
    ----------
    fit : Fit
    mode : {"prior", "posterior"}
    indices : sequence of int
        Which; each has a random stream of its own.
    n_draws : int
        Posterior draws among which the truth is ranked.
    joint : ndarray, shape (n, n_dim), optional
        Draws of the joint posterior, in sampling coordinates; the mode `posterior` takes its truths
        from them.
    alter : callable, optional
        Changes simulated data before they are fitted, so that a wrong likelihood is put to the
        test: a check of the check.
    """
    return [_replicate(fit, mode, index, n_draws, joint, alter) for index in indices]


def _replicate(
    fit: Fit,
    mode: str,
    index: int,
    n_draws: int,
    joint: Array | None,
    alter: Callable[[tuple[DataSet, ...]], tuple[DataSet, ...]] | None,
) -> Replicate:
    began = time.perf_counter()
    key = (STREAM, MODES.index(mode), index)
    rng = np.random.default_rng(np.random.SeedSequence(fit.analysis.sampler.seed, spawn_key=key))
    x, datasets = _truth_and_data(fit, mode, joint, rng)
    truth = fit.prior.to_parameters(x[None])[0]
    if alter is not None:
        datasets = alter(datasets)
    posterior = Posterior.of(response_of(fit, datasets), fit.prior)
    if mode == "prior":
        posterior = replace(posterior, inside=within_reach(fit.response.datasets, datasets))
    settings = sampler_of(fit.analysis.sampler, fit.prior.n_dim, int(rng.integers(2**31)))
    log_prob = posterior.ln_prob if mode == "prior" else _Both(fit.posterior, posterior).ln_prob
    result = run_ensemble(log_prob, fit.prior.n_dim, settings, 0, around=x)
    samples = result.samples
    chosen = samples[np.linspace(0, len(samples) - 1, n_draws).astype(int)]
    theta = fit.prior.to_parameters(chosen)
    ranks = _ranks(_quantities(fit, truth[None])[0], _quantities(fit, theta), rng)
    seconds = time.perf_counter() - began
    return Replicate(index, tuple(int(r) for r in ranks), bool(result.stopped), seconds)


def _truth_and_data(
    fit: Fit, mode: str, joint: Array | None, rng: np.random.Generator
) -> tuple[Array, tuple[DataSet, ...]]:
    if mode == "posterior":
        assert joint is not None
        x = joint[rng.integers(len(joint))]
        return x, simulate(fit, fit.prior.to_parameters(x[None])[0], rng)
    inside = within_reach(fit.response.datasets, fit.response.datasets)
    for _ in range(ATTEMPTS):
        points = rng.standard_normal((AT_ONCE, fit.prior.n_dim))
        theta = fit.prior.to_parameters(points)
        usable = np.flatnonzero(fit.posterior.walkers.in_range(theta))
        predicted = fit.posterior.walkers.predict(theta[usable])
        found = usable[inside(predicted) & np.isfinite(predicted).all(axis=1)]
        if len(found):
            return points[found[0]], simulate(fit, theta[found[0]], rng)
    raise ValueError(
        f"none of {ATTEMPTS * AT_ONCE} draws of the prior predicts data within a factor "
        f"{REACH:g} of those given: calibrate in the mode posterior"
    )


def within_reach(
    original: Sequence[DataSet], datasets: Sequence[DataSet]
) -> Callable[[Array], NDArray[np.bool_]]:
    """Return which predictions lie within a factor `REACH` of all measurements and counts.

    Parameters
    ----------
    original : sequence of DataSet
        The data. Limits, counts of nothing and lists of absorbers set no bounds.
    datasets : sequence of DataSet
        The same, or replicates of them: the rows that predictions are of.

    Returns
    -------
    callable
        ``(n, n_rows) -> (n,)``.
    """
    rows, middles, dex = [], [], []
    end = 0
    for data, other in zip(original, datasets, strict=True):
        start, end = end, end + other.n_rows
        if data.role is not None:
            continue
        kept = np.flatnonzero((data.limit == 0) & (data.logarithmic | (data.observed > 0.0)))
        rows.append(start + kept)
        values = data.observed[kept]
        middles.append(values * LN10 if data.logarithmic else np.log(values))
        dex.append(np.full(len(kept), data.logarithmic))
    where, middle, is_dex = (np.concatenate(parts) for parts in (rows, middles, dex))

    def inside(predicted: Array) -> NDArray[np.bool_]:
        values = predicted[:, where]
        with np.errstate(divide="ignore", invalid="ignore"):
            ln_values = np.where(is_dex, values * LN10, np.log(values))
        return np.asarray((np.abs(ln_values - middle) < np.log(REACH)).all(axis=1))

    return inside


def response_of(fit: Fit, datasets: Sequence[DataSet]) -> Response:
    """Return the response of replicated data: that of lists of absorbers is made anew.

    Parameters
    ----------
    fit : Fit
        Of the original data.
    datasets : sequence of DataSet
        Replicated, in the same order.
    """
    blocks = [
        block if data.role is None else QUANTITIES[data.quantity].respond(data, fit.setting)
        for data, block in zip(datasets, fit.response.blocks, strict=True)
    ]
    return replace(fit.response, datasets=tuple(datasets), blocks=tuple(blocks))


@dataclass(frozen=True)
class _Both:
    """The posterior of original and replicated data together, predictions made once for both.

    Parameters
    ----------
    first, second : Posterior
        With one model and prior; only lists of absorbers have other rows in the second.
    """

    first: Posterior
    second: Posterior

    @cached_property
    def _lists(self) -> WalkerResponse | None:
        """The response of the second's lists alone."""
        response = self.second.response
        kept = [i for i, data in enumerate(response.datasets) if data.role is not None]
        if not kept:
            return None
        few = replace(
            response,
            datasets=tuple(response.datasets[i] for i in kept),
            blocks=tuple(response.blocks[i] for i in kept),
        )
        return WalkerResponse(few, self.first.walkers.reference)

    def _second_rows(self, predicted: Array, theta: Array) -> Array:
        """Return the predictions of the second's rows from those of the first's."""
        if self._lists is None:
            return predicted
        of_lists = self._lists.predict(theta)
        parts, at = [], 0
        for data, rows in zip(self.second.response.datasets, self._first_slices, strict=True):
            if data.role is None:
                parts.append(predicted[:, rows])
                continue
            parts.append(of_lists[:, at : at + data.n_rows])
            at += data.n_rows
        return np.concatenate(parts, axis=1)

    @property
    def _first_slices(self) -> tuple[slice, ...]:
        return self.first.response.slices

    def ln_prob(self, x: Array) -> Array:
        """Return ln of prior times both likelihoods, shape (n,); `x` as for `Posterior.ln_prob`."""
        prior = self.first.prior
        theta = prior.to_parameters(x)
        usable = np.flatnonzero(self.first.walkers.in_range(theta))
        out = np.full(len(x), -np.inf)
        if len(usable):
            kept = theta[usable]
            nuisances = kept[:, self.first.response.n_parameters :]
            with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
                predicted = self.first.walkers.predict(kept)
                out[usable] = self.first.likelihood.ln_total(predicted, nuisances)
                again = self._second_rows(predicted, kept)
                out[usable] += self.second.likelihood.ln_total(again, nuisances)
        return out + prior.ln_density(x)


def _quantities(fit: Fit, theta: Array) -> Array:
    draws = make_draws(theta, fit.setting, fit.analysis)
    return np.concatenate([theta, headline_draws(draws).values], axis=1)


def _ranks(truth: Array, draws: Array, rng: np.random.Generator) -> Any:
    """Return how many draws are below the truth; ties (paths beyond reach) at random."""
    ties = (draws == truth).sum(axis=0)
    return (draws < truth).sum(axis=0) + rng.integers(0, ties + 1)


def write_batch(fit: Fit, mode: str, batch: int, joint: Array | None, output: str | Path) -> None:
    """Make one batch of replicates and write its ranks as JSON, whole or not at all.

    Parameters
    ----------
    fit : Fit
    mode : {"prior", "posterior"}
    batch : int
    joint : ndarray, shape (n, n_dim), or None
        As for `calibrate`.
    output : path-like
    """
    settings = fit.analysis.checks.calibration
    first = batch * settings.batch
    indices = range(first, min(first + settings.batch, settings.replicates))
    made = calibrate(fit, mode, indices, settings.draws, joint)
    found = {"names": quantity_names(fit), "replicates": [asdict(replicate) for replicate in made]}
    text = json.dumps(found)
    write_whole(output, lambda temporary: temporary.write_text(text + "\n", encoding="utf-8"))


def write_calibration(
    fit: Fit, mode: str, batches: Sequence[str | Path], *, table: str | Path, figure: str | Path
) -> None:
    """Judge the ranks of all batches; write table and figure.

    Parameters
    ----------
    fit : Fit
    mode : str
    batches : sequence of path-like
        Files of `write_batch`.
    table, figure : path-like
        ECSV file; figure without suffix.
    """
    found = [json.loads(Path(path).read_text(encoding="utf-8")) for path in batches]
    replicates = [replicate for batch in found for replicate in batch["replicates"]]
    names, n_draws = found[0]["names"], fit.analysis.checks.calibration.draws
    ranks = np.array([replicate["ranks"] for replicate in replicates])
    alpha = fit.analysis.checks.false_alarm
    judged = rank_table(ranks, n_draws, names, alpha)
    missed = sum(not replicate["met_target"] for replicate in replicates)
    seconds = [float(replicate["seconds"]) for replicate in replicates]
    judged.meta["mode"] = mode
    judged.meta["n_short_of_target"] = missed
    judged.meta["seconds_per_replicate"] = float(np.median(seconds))
    write_table(judged, table, **fit.table_meta())
    save(draw_calibration(ranks, n_draws, names, alpha), figure)
