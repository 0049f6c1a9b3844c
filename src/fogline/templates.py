"""Starter constraint files with comments, written from the specifications that files are read by.

``fogline template QUANTITY`` prints one. As printed it is a valid file with example numbers; the
comments explain every key and show the other forms that a file of the quantity may take.
"""

from __future__ import annotations

import textwrap
from collections.abc import Iterator

from fogline.cosmology_keys import float_text
from fogline.quantities import FILE_SPECS
from fogline.quantities.spec import COMMON_META, FileSpec, MetaKey, ValueColumn

_WIDTH = 92
_REDSHIFTS = (2.4, 3.0)


def template(quantity: str) -> str:
    """Return a commented starter constraint file.

    Parameters
    ----------
    quantity : str
        A key of `FILE_SPECS`.

    Returns
    -------
    str
        ECSV text with example numbers, valid as it is.
    """
    spec = FILE_SPECS[quantity]
    form = _example_form(spec)
    value = spec.values[form]
    names = _column_names(spec, value)
    header = [
        *_comment(f"{spec.description} All numbers are examples: replace them."),
        "datatype:",
        *_columns(spec, value),
        *_alternatives(spec, value),
        "meta:",
        *_meta(spec),
        "schema: astropy-2.0",
    ]
    lines = ["%ECSV 1.0", "---", *header]
    return "\n".join([*(f"# {line}" for line in lines), " ".join(names), *_rows(spec, value), ""])


def _comment(text: str, indent: str = "") -> list[str]:
    return [f"{indent}# {line}" for line in textwrap.wrap(text, _WIDTH - len(indent))]


def _example_form(spec: FileSpec) -> str:
    key = next((key for key in spec.meta if key.name == spec.form_key), None)
    return "" if key is None else str(key.example)


def _column_names(spec: FileSpec, value: ValueColumn) -> list[str]:
    bins = ["log_nhi_lo", "log_nhi_hi"] if spec.column_bins else []
    wavelengths = ["wavelength"] if spec.wavelengths else []
    return ["z", *bins, *wavelengths, value.name, "err", "label"]


def _columns(spec: FileSpec, value: ValueColumn) -> Iterator[str]:
    yield "- {name: z, datatype: float64}"
    if spec.column_bins:
        yield "- {name: log_nhi_lo, datatype: float64}   # edges of the bin, log10(N / cm^-2)"
        yield "- {name: log_nhi_hi, datatype: float64}"
    if spec.wavelengths:
        yield "- {name: wavelength, unit: Angstrom, datatype: float64}   # at rest"
    unit = f"unit: {value.example_unit}, " if value.example_unit else ""
    yield f"- {{name: {value.name}, {unit}datatype: float64}}   # {value.help}"
    yield f"- {{name: err, {unit}datatype: float64}}   # one sigma"
    yield "- {name: label, datatype: string}   # optional, names the row"


def _alternatives(spec: FileSpec, value: ValueColumn) -> Iterator[str]:
    yield "# Other columns that may stand here:"
    if spec.absorbers:
        yield "#   sightline (a whole number, as in the survey path): on which it was found"
    else:
        yield "#   z_lo, z_hi instead of z: a redshift bin (weighted by absorption distance)"
    if spec.wavelengths:
        yield "#   wavelength_lo, wavelength_hi instead of wavelength: a bin of rest wavelengths"
    yield "#   err_lo, err_hi instead of err: errors that differ between the sides"
    empty = "" if value.logarithmic else "; err may then be empty"
    if spec.absorbers:
        yield '#   limit (string): lower or empty (""); log_nhi is then a lower bound, err optional'
    else:
        yield '#   limit (string): upper, lower or empty (""); value is then the limit at the'
        yield f"#     confidence in meta{empty}"
    if spec.counts:
        yield f"#   count, path instead of {value.name} and err: absorbers found and path searched"
        yield "#     (of the kind that 'per' says, summed over sightlines); errors are then Poisson"
    for form, other in spec.values.items():
        if other.units:
            where = f" with {spec.form_key}: {form}" if form else ""
            yield f"# Unit of value and errors{where}: one that converts to"
            yield f"#   {' or '.join(other.units)}"


def _meta(spec: FileSpec) -> Iterator[str]:
    for key in (*COMMON_META, *spec.meta):
        yield from (f"  {line}" for line in _meta_key(spec, key))
    when = spec.cosmology_when
    if when is None:
        note = "not needed for this quantity"
    elif when:
        note = "needed with " + " and ".join(f"{k}: {' | '.join(v)}" for k, v in when.items())
    else:
        note = "the one that the numbers were derived with"
    text = f"cosmology ({note}); H0 in km/s/Mpc, optional Ode0 (flat without)"
    yield from _comment(text, indent="  ")
    yield f"  {'' if when == {} else '# '}cosmology: {{H0: 70.0, Om0: 0.3}}"


def _meta_key(spec: FileSpec, key: MetaKey) -> Iterator[str]:
    example = spec.quantity if key.name == "quantity" else key.example
    example = key.default if example is None else example
    grouped = any(key.name in group for group in spec.exactly_one_of)
    first = any(key.name == group[0] for group in spec.exactly_one_of)
    active = first or (key.required and not key.required_when)
    notes = [key.help, _range(key), _group_note(spec, key)]
    if not active and not grouped:
        notes.append("optional" if not key.required_when else "")
    yield from _comment("; ".join(note for note in notes if note))
    yield f"{'' if active else '# '}{key.name}: {_scalar(example)}"


def _range(key: MetaKey) -> str:
    told = key.kind == "choice" and all(choice in key.help for choice in key.choices)
    return "" if told or key.kind in ("text", "distribution") else key.allowed


def _group_note(spec: FileSpec, key: MetaKey) -> str:
    for group in spec.exactly_one_of:
        if key.name in group:
            others = " or ".join(name for name in group if name != key.name)
            return f"exactly one of this and {others}"
    return ""


def _scalar(value: object) -> str:
    if isinstance(value, float):
        return float_text(value)
    if isinstance(value, dict):
        return "{" + ", ".join(f"{key}: {_scalar(item)}" for key, item in value.items()) + "}"
    return "..." if value is None else str(value)


def _rows(spec: FileSpec, value: ValueColumn) -> Iterator[str]:
    bins = (" 20.3 20.6", " 20.6 20.9") if spec.column_bins else ("", "")
    bins = (" 880.0", " 900.0") if spec.wavelengths else bins
    for z, columns, label in zip(_REDSHIFTS, bins, ("first", "second"), strict=True):
        numbers = f"{float_text(value.example)} {float_text(value.example_err)}"
        yield f'{z}{columns} {numbers} "{label} row"'
