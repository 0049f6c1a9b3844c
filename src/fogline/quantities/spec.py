"""What a constraint file of one quantity must hold, as data that the reader interprets.

Every quantity declares its columns and meta keys here-typed; `fogline.constraint_files` validates
files against the declaration, and `fogline.templates` prints starter files from it, so that the
two cannot disagree.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Final, Literal


@dataclass(frozen=True, slots=True)
class MetaKey:
    """One key of a file's ``meta``.

    Parameters
    ----------
    name : str
        The key.
    kind : {"choice", "number", "text", "distribution"}
        What its value is.
    help : str
        One line for templates and error messages.
    choices : tuple of str
        Allowed values of a choice.
    minimum, maximum : float
        Range of a number.
    exclusive : bool
        Whether the ends of the range are themselves not allowed.
    required : bool
        Whether the file must state it.
    required_when : mapping of str to tuple of str
        Required where the named meta keys have one of these values (all must match), and not
        allowed elsewhere, where it would be without effect.
    default : Any
        Value taken where the file is silent.
    example : Any
        Value written into the template.
    """

    name: str
    kind: Literal["choice", "number", "text", "distribution"]
    help: str
    choices: tuple[str, ...] = ()
    minimum: float = float("-inf")
    maximum: float = float("inf")
    exclusive: bool = False
    required: bool = True
    required_when: dict[str, tuple[str, ...]] = field(default_factory=dict)
    default: Any = None
    example: Any = None

    def allows(self, number: float) -> bool:
        """Return whether a number lies in the key's range."""
        if self.exclusive:
            return self.minimum < number < self.maximum
        return self.minimum <= number <= self.maximum

    @property
    def allowed(self) -> str:
        """The allowed values in words, for messages and templates."""
        if self.kind == "choice":
            return " | ".join(self.choices)
        if self.kind == "distribution":
            return "a distribution such as {dist: norm, loc: 1.0, scale: 0.05}"
        return (
            "text" if self.kind == "text" else interval(self.minimum, self.maximum, self.exclusive)
        )


def interval(minimum: float, maximum: float, exclusive: bool = False) -> str:
    """Return a range of numbers in words, e.g. ``a number in (0, 1)``."""
    above, below = (">", "<") if exclusive else (">=", "<=")
    if minimum == float("-inf") and maximum == float("inf"):
        return "a finite number"
    if maximum == float("inf"):
        return f"a number {above} {minimum:g}"
    if minimum == float("-inf"):
        return f"a number {below} {maximum:g}"
    ends = "()" if exclusive else "[]"
    return f"a number in {ends[0]}{minimum:g}, {maximum:g}{ends[1]}"


COMMON_META: Final = (
    MetaKey("quantity", "text", "what is measured"),
    MetaKey("source", "text", "where the numbers come from", example="Table 1 of ..."),
    MetaKey("note", "text", "anything a reader should know", required=False),
    MetaKey(
        "confidence",
        "number",
        "confidence of the limits, where the file has any",
        minimum=0.5,
        maximum=1.0,
        exclusive=True,
        required=False,
        default=0.95,
    ),
    MetaKey(
        "likelihood",
        "choice",
        "what the errors describe: split_normal (each side its own sigma) or lognormal "
        "(sigma of ln value is err / value)",
        choices=("split_normal", "lognormal"),
        required=False,
        default="split_normal",
    ),
    MetaKey(
        "covariance",
        "text",
        "file, beside this one, with the covariance or correlation of the rows' errors",
        required=False,
        example="covariance.ecsv",
    ),
    MetaKey(
        "student_dof",
        "number",
        "degrees of freedom of Student-t in place of normal errors, against outliers",
        minimum=1.0,
        maximum=1000.0,
        required=False,
        example=4,
    ),
    MetaKey(
        "scale",
        "distribution",
        "prior of a factor on the predictions, for an uncertain calibration",
        required=False,
        example={"dist": "norm", "loc": 1.0, "scale": 0.05},
    ),
    MetaKey(
        "scatter",
        "distribution",
        "prior of an extra scatter added to the errors in quadrature, in their unit",
        required=False,
        example={"dist": "halfnorm", "scale": 0.1},
    ),
)
"""Meta keys of every constraint file (``cosmology`` is treated apart)."""


@dataclass(frozen=True, slots=True)
class ValueColumn:
    """The measured column of a quantity and what its numbers may be.

    Parameters
    ----------
    name : str
        ``value``, or ``log_f`` for the column-density distribution.
    units : tuple of str
        Units (astropy strings) to one of which the column's unit must convert; empty where the
        column must be dimensionless.
    logarithmic : bool
        Whether value and errors are in dex (a limit then needs an explicit error).
    minimum, maximum : float
        Open range of physically possible values.
    example, example_err : float
        Numbers written into the template.
    example_unit : str
        Unit written into the template; empty where dimensionless.
    help : str
        What the numbers are, in a few words.
    bare_limits : bool
        Whether a limit may lack an error whatever the scale.
    """

    name: str = "value"
    units: tuple[str, ...] = ()
    logarithmic: bool = False
    minimum: float = 0.0
    maximum: float = float("inf")
    example: float = 1.0
    example_err: float = 0.1
    example_unit: str = ""
    help: str = "measured value"
    bare_limits: bool = False


@dataclass(frozen=True, slots=True)
class FileSpec:
    """Everything the reader needs to know about one quantity's files.

    Parameters
    ----------
    quantity : str
        Its name, the value of ``meta: quantity``.
    description : str
        One sentence for templates.
    meta : tuple of MetaKey
        Keys of this quantity beside the common ones.
    values : mapping of str to ValueColumn
        The measured column by the value of the meta key `form_key`; the key ``""`` where
        the quantity has a single form.
    form_key : str
        Meta key that chooses the form; empty where there is one form.
    counts : bool
        Whether columns ``count`` and ``path`` may stand instead of the measured column.
    column_bins : bool
        Whether rows carry ``log_nhi_lo`` and ``log_nhi_hi``.
    wavelengths : bool
        Whether rows carry ``wavelength``, or ``wavelength_lo`` and ``wavelength_hi``, at rest.
    absorbers : bool
        Whether rows are single absorbers, which may state their ``sightline``.
    cosmology_when : mapping of str to tuple of str, or None
        ``cosmology`` is required where all named meta keys have one of these values (an empty
        mapping: always); None: never required.
    exactly_one_of : tuple of tuple of str
        Groups of meta keys of which exactly one must be given.
    """

    quantity: str
    description: str
    meta: tuple[MetaKey, ...]
    values: dict[str, ValueColumn]
    form_key: str = ""
    counts: bool = False
    column_bins: bool = False
    wavelengths: bool = False
    absorbers: bool = False
    cosmology_when: dict[str, tuple[str, ...]] | None = None
    exactly_one_of: tuple[tuple[str, ...], ...] = ()


LOG_NHI_RANGE: Final = (8.0, 26.0)
"""Columns that a file may speak of [dex of cm^-2]: generous, to catch N for log N."""

PER: Final = MetaKey(
    "per",
    "choice",
    "path that the numbers are per: dz (redshift) or dX (absorption distance; needs cosmology)",
    choices=("dz", "dX"),
    example="dz",
)
"""The meta key of quantities that are per unit path."""


def column_key(end: str, help: str, required: bool, example: float) -> MetaKey:
    """Return the meta key of one end of the counted columns.

    Parameters
    ----------
    end : {"min", "max"}
    help : str
        Which columns these are.
    required : bool
    example : float [dex of cm^-2]
    """
    low, high = LOG_NHI_RANGE
    return MetaKey(
        f"log_nhi_{end}",
        "number",
        f"{help}, log10(N / cm^-2)",
        minimum=low,
        maximum=high,
        required=required,
        example=example,
    )
