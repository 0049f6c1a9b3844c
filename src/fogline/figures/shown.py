"""Puts all data sets of a quantity on an axis along redshift, each by its convention."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from matplotlib.axes import Axes

from fogline.datasets import DataSet
from fogline.figures.data_points import ToDisplay, along_z, draw_points, draw_predictions
from fogline.figures.inputs import FigureInputs
from fogline.figures.style import dataset_styles


@dataclass(frozen=True)
class Shown:
    """One data set on an axis.

    Parameters
    ----------
    data : DataSet
    to_display : callable
        From the file's numbers to those of the axis.
    difference : str
        What sets its convention apart from the curve; its prediction is then drawn beside it.
    filled : bool
        Whether its symbols are filled.
    note : str
        Added to its label.
    """

    data: DataSet
    to_display: ToDisplay
    difference: str = ""
    filled: bool = field(default=True, kw_only=True)
    note: str = field(default="", kw_only=True)


def draw_along_z(axes: Axes, inputs: FigureInputs, shown: Sequence[Shown]) -> None:
    """Draw data sets against redshift, and predictions where conventions differ."""
    styles = dataset_styles(inputs.fit)
    for item in shown:
        style = styles[item.data.name]
        extra = [part for part in (item.note, item.difference) if part]
        label = style.label + (f" ({', '.join(extra)})" if extra else "")
        points = along_z(item.data, item.to_display)
        draw_points(axes, points, style, filled=item.filled, label=label)
        if item.difference:
            predicted = item.to_display(inputs.predicted(item.data))
            draw_predictions(axes, points.x, predicted, style)


def convention_note(shown: Sequence[Shown]) -> list[str]:
    """Return the line that explains the bars beside data, where there are any."""
    if not any(item.difference for item in shown):
        return []
    return [
        "Small circles beside data: prediction (68%) in the data set's own convention "
        "(in parentheses)."
    ]
