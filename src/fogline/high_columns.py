"""Forms of f(N) above a chosen column, in place of spline pivots.

Each is normalised to 1 at the join, where it takes over from the spline; what is left are
parameters of its shape. With x = log10 N:

``gamma``: N^-slope exp(-N / N_c). Parameters ``slope``, ``log_nc``.

``double_power_law``: N^-slope below N_b and N^-steep above. Parameters ``slope``, ``steep``,
``log_nb``.

``discs``: randomly inclined exponential discs with one face-on central column N_0 (parameter
``log_n0``). A disc whose face-on column is N_0 exp(-r/R), seen at an inclination of cosine μ, has
the column N = N_0 exp(-r/R) / μ over the projected area 2π r dr μ. Hence r = R ln[N_0 / (μ N)] and
|dr/dN| = R/N, and over all orientations, μ even on (0, 1)::

    f(N) ∝ ∫ μ r |dr/dN| dμ ∝ (1/N) ∫_0^min(1, N_0/N) μ ln[N_0/(μN)] dμ
         = [1 + 2 ln(N_0/N)] / (4N)         for N ≤ N_0,
         = N_0² / (4 N³)                    for N ≥ N_0.

Its logarithmic slope is continuous: -3 beyond the face-on central column (inclination alone makes
such columns; common practice), -2 at N_0/e^0.5, and towards -1 far below it. A Monte Carlo of
discs is the test (``tests/unit/test_high_columns.py``).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar, Final, Protocol

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

LN10: Final = float(np.log(10.0))


class HighColumnForm(Protocol):
    """A shape of f above the join."""

    @property
    def names(self) -> tuple[str, ...]:
        """Its parameters, in order."""
        ...

    @property
    def panel(self) -> float:
        """Width of the quadrature panels that it needs [dex]."""
        ...

    def ln_shape(self, parameters: Array, log_nhi: Array, join: float) -> Array:
        """Return ln f over its value at the join.

        Parameters
        ----------
        parameters : ndarray, shape (n, n_names)
        log_nhi : ndarray, shape (n_points,) [dex of cm^-2]
        join : float [dex of cm^-2]

        Returns
        -------
        ndarray, shape (n, n_points)
        """
        ...


@dataclass(frozen=True)
class GammaFunction:
    """Power law with an exponential cut-off."""

    names: ClassVar = ("slope", "log_nc")
    panel = 0.25

    def ln_shape(self, parameters: Array, log_nhi: Array, join: float) -> Array:
        """Return ln f over its value at the join."""
        slope, log_nc = parameters[:, 0, None], parameters[:, 1, None]
        # N / N_c as a product: one power a vector and one a point, not one for each pair.
        cut_off = (10.0**log_nhi - 10.0**join) * 10.0**-log_nc
        return np.asarray(-slope * LN10 * (log_nhi - join) - cut_off)


@dataclass(frozen=True)
class DoublePowerLaw:
    """Two power laws that meet at a break."""

    names: ClassVar = ("slope", "steep", "log_nb")
    # The break lies anywhere within a panel: narrow ones bound what that costs.
    panel = 0.05

    def ln_shape(self, parameters: Array, log_nhi: Array, join: float) -> Array:
        """Return ln f over its value at the join."""
        slope, steep, log_nb = (parameters[:, i, None] for i in range(3))
        ends = np.stack([log_nhi, np.full_like(log_nhi, join)])[:, None]
        # Counted from the break: the part above it, and the part below.
        above = np.maximum(ends - log_nb, 0.0)
        below = np.minimum(ends - log_nb, 0.0)
        ln_f = -LN10 * (steep * above + slope * below)
        return np.asarray(ln_f[0] - ln_f[1])


@dataclass(frozen=True)
class InclinedDiscs:
    """Randomly inclined exponential discs."""

    names: ClassVar = ("log_n0",)
    panel = 0.15

    def ln_shape(self, parameters: Array, log_nhi: Array, join: float) -> Array:
        """Return ln f over its value at the join."""
        log_n0 = parameters[:, 0, None]
        return np.asarray(_ln_discs(log_nhi - log_n0) - _ln_discs(join - log_n0))


def _ln_discs(x: Array) -> Array:
    """Return ln f of discs up to a constant, x = log10(N/N_0)."""
    below = np.log1p(-2.0 * LN10 * np.minimum(x, 0.0)) - LN10 * np.minimum(x, 0.0)
    return np.asarray(np.where(x < 0.0, below, -3.0 * LN10 * x))


FORMS: Final[dict[str, HighColumnForm]] = {
    "gamma": GammaFunction(),
    "double_power_law": DoublePowerLaw(),
    "discs": InclinedDiscs(),
}
"""The forms by the name in configs."""
