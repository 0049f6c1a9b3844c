"""Numbers with their errors as people quote them: two digits of the smaller error.

A value beyond reach (+inf: a free path that ends nowhere) is told in words, with the lower limit
where there is one. A power of ten is taken out where the value is below 10^-2 or at least 10^5.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

BEYOND: Final = "beyond reach"
"""What stands for infinity, in every table and page."""

SMALLEST: Final = 1e-2
LARGEST: Final = 1e5
"""Values from the one to below the other are written without a power of ten."""

_RAISED: Final = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


@dataclass(frozen=True)
class Rounded:
    """A value and its asymmetric errors as they are printed.

    Parameters
    ----------
    value : str
    plus, minus : str
        Errors without sign; empty where `value` says all.
    power : int
        Of ten, common to all three.
    """

    value: str
    plus: str
    minus: str
    power: int

    @property
    def text(self) -> str:
        """Plain text, such as ``1.43 (+0.15 −0.14) × 10⁸``."""
        if not self.plus:
            return self.value
        same = self.plus == self.minus
        errors = f" ± {self.plus}" if same else f" (+{self.plus} −{self.minus})"
        if self.plus == BEYOND:
            errors = f" (−{self.minus}, upper end {BEYOND})"
        if not self.power:
            return self.value + errors
        body = f"({self.value}{errors})" if same else self.value + errors
        return f"{body} × 10{str(self.power).translate(_RAISED)}"


def rounded(median: float, lo: float, hi: float) -> Rounded:
    """Return a median and its interval, rounded to two digits of the smaller error.

    Parameters
    ----------
    median, lo, hi : float
        ``lo <= median <= hi``; +inf is beyond reach.

    Returns
    -------
    Rounded

    Raises
    ------
    ValueError
        Where one of them is NaN.
    """
    if math.isnan(median + lo) or math.isnan(hi):
        raise ValueError(f"a band must not hold NaN, got {median!r}, {lo!r}, {hi!r}")
    if math.isinf(lo):
        return Rounded(BEYOND, "", "", 0)
    if math.isinf(median):
        limit = float(f"{lo:.3g}")
        return Rounded(f"{BEYOND} (84% of draws above {limit:g})", "", "", 0)
    power = _power(median)
    scale = 10.0**-power
    down, up = (median - lo) * scale, (hi - median) * scale
    errors = [error for error in (down, up) if error > 0.0 and math.isfinite(error)]
    if not errors:
        beyond = f" (upper end {BEYOND})" if math.isinf(hi) else ""
        return Rounded(f"{median:.3g}{beyond}", "", "", 0)
    places = _places(min(errors))
    plus = BEYOND if math.isinf(up) else _fixed(up, places)
    return Rounded(_fixed(median * scale, places), plus, _fixed(down, places), power)


def _power(value: float) -> int:
    """Return the power of ten that is taken out of a value."""
    size = abs(value)
    return 0 if size == 0.0 or SMALLEST <= size < LARGEST else math.floor(math.log10(size))


def _places(error: float) -> int:
    """Return the decimals that show two digits of an error; negative above 100."""
    # The format rounds first: 0.0996 has the digits 1.0e-1, and so one decimal fewer.
    return 1 - int(f"{error:.1e}".partition("e")[2])


def _fixed(number: float, places: int) -> str:
    text = f"{round(number, places):.{max(places, 0)}f}"
    return text.replace("-", "−")
