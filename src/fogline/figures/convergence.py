"""Evidence for or against convergence: traces, R-hat, sample sizes, autocorrelation times."""

from __future__ import annotations

import textwrap
from collections.abc import Hashable, Sequence
from typing import Any, Final

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from fogline.figures.inputs import FigureInputs
from fogline.figures.style import COLOURS, SMALL, TWO_COLUMNS, WARNING, styled

Array = NDArray[np.float64]

N_TRACES: Final = 3
"""Parameters whose traces are drawn: those with the largest R-hat."""

TRUSTED_LENGTH: Final = 50.0
"""Chains shorter than this many autocorrelation times give no trusted estimate (emcee)."""

LINES: Final = ("-", "--", "-.", ":")


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
    figure = Figure(figsize=(TWO_COLUMNS, 5.2), layout="constrained")
    _title(figure, inputs)
    slots: list[list[Hashable]] = [["trace0", "rhat"], ["trace1", "ess"], ["trace2", "growth"]]
    panels = figure.subplot_mosaic(slots)
    parameters = inputs.convergence["parameters"]
    for slot, index in enumerate(_least_converged(parameters)):
        _draw_trace(panels[f"trace{slot}"], inputs, index)
    for slot in range(len(parameters), N_TRACES):
        panels[f"trace{slot}"].set_axis_off()
    _draw_rhat(panels["rhat"], inputs)
    _draw_sizes(panels["ess"], inputs)
    _draw_growth(panels["growth"], inputs)
    return figure


def _title(figure: Figure, inputs: FigureInputs) -> None:
    if inputs.converged:
        figure.suptitle("converged")
        return
    reasons = [f"– {reason}" for reason in inputs.convergence.get("reasons", [])]
    lines = ["not converged", *(part for r in reasons for part in textwrap.wrap(r, 120))]
    figure.suptitle("\n".join(lines), color=WARNING)


def _number(value: Any) -> float:
    """Return a number of the JSON file; None stands for what is not finite."""
    return float("nan") if value is None else float(value)


def _least_converged(parameters: Sequence[dict[str, Any]]) -> list[int]:
    rhat = np.array([_number(p["rhat"]) for p in parameters])
    order = np.argsort(-np.where(np.isnan(rhat), np.inf, rhat), kind="stable")
    return sorted(int(i) for i in order[:N_TRACES])


def _draw_trace(axes: Axes, inputs: FigureInputs, index: int) -> None:
    for number, result in enumerate(inputs.ensembles):
        steps = result.thin * (1 + np.arange(len(result.chain)))
        lo, median, hi = np.quantile(result.chain[:, :, index], [0.16, 0.5, 0.84], axis=1)
        colour = COLOURS[number % len(COLOURS)]
        axes.fill_between(steps, lo, hi, color=colour, alpha=0.2, linewidth=0.0)
        axes.plot(steps, median, color=colour, linewidth=0.7, label=f"ensemble {result.index}")
    axes.set_xlabel("step after warm-up")
    axes.set_ylabel("prior sigmas")
    name = _label(inputs.convergence["parameters"][index]["name"])
    axes.set_title(f"{name}: median and 68% of the walkers", loc="left", pad=3.0)
    lo, hi = axes.get_ylim()
    axes.set_ylim(lo, hi + 0.22 * (hi - lo))
    axes.legend(loc="upper right", ncols=4)


def _label(name: str) -> str:
    kind, _, column = name.rstrip("]").partition("[")
    symbol = r"\log f" if kind == "log_f" else r"\gamma"
    return rf"${symbol}_{{{float(column):g}}}$" if column else name


def _parameter_axis(axes: Axes, parameters: Sequence[dict[str, Any]]) -> Array:
    x = np.arange(len(parameters), dtype=float)
    axes.set_xticks(x, [_label(p["name"]) for p in parameters], rotation=90, fontsize=SMALL)
    axes.tick_params(axis="x", which="minor", bottom=False, top=False)
    axes.set_xlim(-0.6, len(x) - 0.4)
    return x


def _draw_rhat(axes: Axes, inputs: FigureInputs) -> None:
    parameters = inputs.convergence["parameters"]
    allowed = inputs.fit.analysis.sampler.max_rhat
    excess = np.array([_number(p["rhat"]) for p in parameters]) - 1.0
    x = _parameter_axis(axes, parameters)
    axes.plot(x, np.maximum(excess, 1e-5), "o", color=COLOURS[0], gid="rhat")
    axes.axhline(allowed - 1.0, color=WARNING, linestyle="--", label="largest allowed")
    axes.set_yscale("log")
    axes.set_ylabel(r"$\hat{R} - 1$")
    axes.margins(y=0.25)
    axes.legend(loc="lower left")


def _draw_sizes(axes: Axes, inputs: FigureInputs) -> None:
    parameters = inputs.convergence["parameters"]
    target = inputs.fit.analysis.sampler.target_ess
    x = _parameter_axis(axes, parameters)
    for key, label, marker, colour in (
        ("ess_bulk", "bulk", "o", COLOURS[0]),
        ("ess_tail", "tail", "^", COLOURS[1]),
    ):
        sizes = [_number(p[key]) for p in parameters]
        axes.plot(x, sizes, marker, color=colour, label=label, gid=key)
    axes.axhline(target, color=WARNING, linestyle="--", label="target")
    axes.set_yscale("log")
    axes.set_ylim(0.2 * target)
    axes.set_ylabel("effective samples")
    axes.legend(loc="lower left", ncols=3)


def _draw_growth(axes: Axes, inputs: FigureInputs) -> None:
    for number, entry in enumerate(inputs.convergence["autocorrelation"]):
        times = [_number(time) for time in entry["time"]]
        axes.plot(
            entry["steps"],
            times,
            marker="o",
            color=COLOURS[number % len(COLOURS)],
            label=f"ensemble {entry['ensemble']}",
        )
    axes.set_xscale("log")
    axes.set_yscale("log")
    ends = np.array(axes.get_xlim())
    axes.plot(ends, ends / TRUSTED_LENGTH, "--", color=WARNING, label="chain length / 50")
    axes.set_xlim(*ends)
    axes.set_xlabel("chain length [steps]")
    axes.set_ylabel("autocorrelation\ntime [steps]")
    axes.legend(loc="upper left")
