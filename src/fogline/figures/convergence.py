"""Evidence for or against convergence: traces, R-hat, sample sizes, autocorrelation times."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import Any, Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from fogline.figures.axis import plain_log_ticks
from fogline.figures.inputs import ONE_SIGMA, FigureInputs
from fogline.figures.style import COLOURS, SMALL, TWO_COLUMNS, WARNING, add_note, styled

Array = NDArray[np.float64]

N_TRACES: Final = 3
"""Parameters whose traces are drawn: those with the largest R-hat."""

TRUSTED_LENGTH: Final = 50.0
"""Chains shorter than this many autocorrelation times give no trusted estimate (emcee)."""

TRACE_POINTS: Final = 400
"""Steps of a trace that are drawn, about."""

LEAST_EXCESS: Final = 1e-5
"""Floor of R-hat - 1 on its axis."""


@styled
def draw(inputs: FigureInputs) -> Figure:
    """Draw traces of the least converged parameters and every diagnostic, under the verdict.

    Parameters
    ----------
    inputs : FigureInputs

    Returns
    -------
    matplotlib.figure.Figure
    """
    figure = Figure(figsize=(TWO_COLUMNS, 4.8), layout="constrained")
    _title(figure, inputs)
    left, right = figure.subfigures(1, 2, squeeze=False)[0]
    traces = list(left.subplots(N_TRACES, sharex=True))
    for axes, index in zip(traces, _least_converged(inputs), strict=False):
        _draw_trace(axes, inputs, index)
    traces[0].legend(loc="upper right", ncols=4)
    traces[-1].set_xlabel("step after warm-up")
    rhat, sizes, growth = right.subplots(3)
    _draw_rhat(rhat, inputs)
    _draw_sizes(sizes, inputs)
    _draw_growth(growth, inputs)
    for part in (left, right):
        part.align_ylabels()
    add_note(figure, ["Left: median and 68% of each ensemble's walkers, where R-hat is largest."])
    return figure


def _title(figure: Figure, inputs: FigureInputs) -> None:
    if inputs.converged:
        figure.suptitle("converged", weight="bold")
        return
    reasons = [f"– {reason}" for reason in inputs.convergence.get("reasons", [])]
    lines = ["not converged", *(part for r in reasons for part in textwrap.wrap(r, 120))]
    figure.suptitle("\n".join(lines), color=WARNING, weight="bold", linespacing=1.3)


def _number(value: Any) -> float:
    """Return a number of the JSON file; None stands for what is not finite."""
    return float("nan") if value is None else float(value)


def _least_converged(inputs: FigureInputs) -> list[int]:
    rhat = np.array([_number(p["rhat"]) for p in inputs.convergence["parameters"]])
    order = np.argsort(-np.where(np.isnan(rhat), np.inf, rhat), kind="stable")
    return sorted(int(i) for i in order[:N_TRACES])


def _draw_trace(axes: Axes, inputs: FigureInputs, index: int) -> None:
    prior = inputs.fit.posterior.prior
    for number, result in enumerate(inputs.ensembles):
        stride = 1 + len(result.chain) // TRACE_POINTS
        x = result.chain[::stride]
        theta = prior.to_parameters(x.reshape(-1, x.shape[2]))[:, index].reshape(x.shape[:2])
        steps = result.thin * (1 + stride * np.arange(len(x)))
        lo, median, hi = np.quantile(theta, ONE_SIGMA, axis=1)
        colour = COLOURS[number % len(COLOURS)]
        axes.fill_between(steps, lo, hi, color=colour, alpha=0.2, linewidth=0.0)
        axes.plot(steps, median, color=colour, linewidth=0.7, label=f"ensemble {result.index}")
    axes.set_ylabel(_label(inputs.fit.prior.names[index]))
    lo, hi = axes.get_ylim()
    axes.set_ylim(lo, hi + 0.2 * (hi - lo))


def _label(name: str) -> str:
    kind, _, of = name.rstrip("]").partition("[")
    symbol = {"log_f": r"\log f", "evolution": r"\gamma"}.get(kind)
    if symbol is None:
        return f"{kind} {of}".replace("_", " ").strip()
    column, _, segment = of.partition(", ")
    return rf"${symbol}_{{{float(column):g}{', ' + segment if segment else ''}}}$"


def _parameter_axis(axes: Axes, parameters: Sequence[dict[str, Any]]) -> Array:
    x = np.arange(len(parameters), dtype=float)
    axes.set_xticks(x, [_label(p["name"]) for p in parameters], rotation=90, fontsize=SMALL)
    axes.tick_params(axis="x", which="minor", bottom=False, top=False)
    axes.set_xlim(-0.6, len(x) - 0.4)
    return x


def _largest(values: Array, floor: float) -> float:
    return float(np.fmax.reduce(values, initial=floor))


def _mark_line(axes: Axes, y: float, text: str) -> None:
    """Draw a horizontal line with its meaning written on it."""
    axes.axhline(y, color=WARNING, linestyle="--", linewidth=0.9)
    axes.annotate(
        text,
        (0.025, y),
        xycoords=axes.get_yaxis_transform(),
        xytext=(0.0, 1.5),
        textcoords="offset points",
        va="bottom",
        color=WARNING,
        fontsize=SMALL,
    )


def _draw_rhat(axes: Axes, inputs: FigureInputs) -> None:
    parameters = inputs.convergence["parameters"]
    allowed = inputs.fit.analysis.sampler.max_rhat
    excess = np.array([_number(p["rhat"]) for p in parameters]) - 1.0
    x = _parameter_axis(axes, parameters)
    axes.tick_params(axis="x", labelbottom=False)
    top = 10.0 * _largest(excess, allowed - 1.0)
    # R-hat may fall below 1 by chance, and has no place on the logarithmic axis there.
    axes.plot(x, np.maximum(excess, LEAST_EXCESS), "o", color=COLOURS[0], gid="rhat")
    infinite = x[np.isnan(excess)]
    axes.plot(infinite, np.full(len(infinite), 0.5 * top), "^", color=WARNING, gid="rhat:infinite")
    _mark_line(axes, allowed - 1.0, f"largest allowed: {allowed:g}")
    axes.set_yscale("log")
    axes.set_ylim(0.5 * LEAST_EXCESS, top)
    axes.set_ylabel(r"$\hat{R} - 1$")


def _draw_sizes(axes: Axes, inputs: FigureInputs) -> None:
    parameters = inputs.convergence["parameters"]
    target = inputs.fit.analysis.sampler.target_ess
    x = _parameter_axis(axes, parameters)
    largest = float(target)
    for key, label, marker, colour in (
        ("ess_bulk", "bulk", "o", COLOURS[0]),
        ("ess_tail", "tail", "^", COLOURS[1]),
    ):
        sizes = np.array([_number(p[key]) for p in parameters])
        axes.plot(x, sizes, marker, color=colour, label=label, gid=key)
        largest = _largest(sizes, largest)
    _mark_line(axes, target, f"target: {target:g}")
    axes.set_yscale("log")
    axes.set_ylim(0.25 * target, 6.0 * largest)
    axes.set_ylabel("effective samples")
    axes.legend(loc="upper right", ncols=2)


def _draw_growth(axes: Axes, inputs: FigureInputs) -> None:
    largest = 0.0
    for number, entry in enumerate(inputs.convergence["autocorrelation"]):
        times = np.array([_number(time) for time in entry["time"]])
        axes.plot(entry["steps"], times, marker="o", color=COLOURS[number % len(COLOURS)])
        largest = _largest(times, largest)
    axes.set_xscale("log")
    axes.set_yscale("log")
    ends = np.array(axes.get_xlim())
    trusted = ends / TRUSTED_LENGTH
    axes.plot(ends, trusted, "--", color=WARNING, linewidth=0.9, label="chain length / 50")
    axes.set_xlim(*ends)
    axes.set_ylim(top=4.0 * max(largest, trusted[1]))
    axes.set_xlabel("chain length [steps]")
    axes.set_ylabel("autocorrelation\ntime [steps]")
    plain_log_ticks(axes.xaxis)
    plain_log_ticks(axes.yaxis)
    axes.legend(loc="upper left")
