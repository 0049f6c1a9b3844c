"""Validation of a constraint file's ``meta`` against its quantity's `FileSpec`."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, Final

from fogline.cosmology_keys import cosmology_faults, is_number, text_number_hint
from fogline.distributions import positive
from fogline.ecsv_lines import RawTable
from fogline.faults import Fault, nearest
from fogline.quantities import FILE_SPECS
from fogline.quantities.spec import COMMON_META, FileSpec, MetaKey

NOT_FOR_COUNTS: Final = ("likelihood", "covariance", "student_dof", "scatter")
"""Meta keys that say something of errors, which counts do not have."""


def find_spec(raw: RawTable, faults: list[Fault]) -> FileSpec | None:
    """Return the specification that a file's ``meta: quantity`` names.

    Parameters
    ----------
    raw : RawTable
        The file.
    faults : list of Fault
        Is appended to.

    Returns
    -------
    FileSpec or None
        None where ``meta`` or ``quantity`` is missing or unknown.
    """
    meta = raw.meta
    if not isinstance(meta, dict):
        what = "ECSV header must have a mapping 'meta' with at least quantity and source"
        faults.append(Fault(raw.path, raw.meta_line(), what))
    elif "quantity" not in meta and "kind" in meta:
        what = (
            f"is a table of kind '{meta['kind']}', not a constraint file: exclude it from datasets"
        )
        faults.append(Fault(raw.path, raw.meta_line("kind"), what))
    elif "quantity" not in meta:
        allowed = ", ".join(FILE_SPECS)
        what = f"meta lacks 'quantity' (what is measured); allowed: {allowed}"
        faults.append(Fault(raw.path, raw.meta_line(), what))
    elif not isinstance(found := meta["quantity"], str) or found not in FILE_SPECS:
        what = f"unknown quantity {found!r}; {nearest(str(found), FILE_SPECS)}"
        faults.append(Fault(raw.path, raw.meta_line("quantity"), what))
    else:
        return FILE_SPECS[found]
    return None


def check_meta(raw: RawTable, spec: FileSpec, counts: bool, faults: list[Fault]) -> dict[str, Any]:
    """Return a file's meta with defaults filled in, appending what is wrong to `faults`.

    Parameters
    ----------
    raw : RawTable
        The file; its ``meta`` is a mapping.
    spec : FileSpec
        The quantity's specification.
    counts : bool
        Whether the rows are counts.
    faults : list of Fault
        Is appended to.

    Returns
    -------
    dict
        Keys of the meta with good values and defaults, without ``cosmology``.
    """
    check = _MetaCheck(raw, spec, faults)
    check.unknown_keys()
    meta = {key.name: check.value(key) for key in (*COMMON_META, *spec.meta)}
    meta = {name: value for name, value in meta.items() if value is not None}
    check.exactly_one()
    check.column_order(meta)
    check.cosmology(meta)
    meta["likelihood"] = check.likelihood(meta, counts)
    if counts:
        check.none_of(NOT_FOR_COUNTS, "has no effect on counts, which are Poisson")
    if spec.absorbers:
        check.none_of(NOT_FOR_COUNTS, "has no effect on single absorbers")
    return meta


class _MetaCheck:
    """The single checks of `check_meta`; each appends its faults."""

    def __init__(self, raw: RawTable, spec: FileSpec, faults: list[Fault]) -> None:
        self.raw = raw
        self.spec = spec
        self.faults = faults
        self.found: Mapping[str, Any] = raw.meta

    def fault(self, what: str, *place: str) -> None:
        self.faults.append(Fault(self.raw.path, self.raw.meta_line(*place), what))

    def unknown_keys(self) -> None:
        known = [key.name for key in (*COMMON_META, *self.spec.meta)] + ["cosmology"]
        for key in self.found:
            if key == "__serialized_columns__":
                self.fault("was written from a QTable or masked table; write Table(...) of it", key)
            elif key not in known:
                hint = nearest(key, known)
                self.fault(f"unknown key '{key}' for {self.spec.quantity}; {hint}", key)

    def value(self, key: MetaKey) -> Any:
        found = self.found.get(key.name)
        needed = _all_match(key.required_when, self.found) and key.required
        if found is None:
            if needed:
                self.fault(f"meta lacks '{key.name}' ({key.help}), must be {key.allowed}", key.name)
            return key.default
        if key.required_when and not needed and key.name in self.found:
            when = " and ".join(f"{k}: {' | '.join(v)}" for k, v in key.required_when.items())
            self.fault(
                f"meta key '{key.name}' has no effect here; allowed only with {when}", key.name
            )
            return None
        if not _good(key, found):
            hint = self._hint(key, found)
            if key.kind == "distribution" and isinstance(found, Mapping):
                self.fault(f"{key.name}: {_distribution_fault(found)}", key.name)
                return key.default
            self.fault(f"{key.name} is {found!r}, must be {key.allowed}{hint}", key.name)
            return key.default
        return float(found) if key.kind == "number" else found

    @staticmethod
    def _hint(key: MetaKey, found: Any) -> str:
        if key.kind == "number":
            return text_number_hint(found)
        near = nearest(str(found), key.choices) if key.kind == "choice" else ""
        return f"; {near}" if near.startswith("did") else ""

    def exactly_one(self) -> None:
        for group in self.spec.exactly_one_of:
            given = [name for name in group if self.found.get(name) is not None]
            if len(given) != 1:
                found = " and ".join(given) or "none of them"
                self.fault(
                    f"meta must have exactly one of {', '.join(group)}, found {found}", *given[1:2]
                )

    def column_order(self, meta: Mapping[str, Any]) -> None:
        low, high = meta.get("log_nhi_min"), meta.get("log_nhi_max")
        if low is not None and high is not None and not low < high:
            self.fault(
                f"log_nhi_max is {high:g}, must be greater than log_nhi_min = {low:g}",
                "log_nhi_max",
            )

    def cosmology(self, meta: Mapping[str, Any]) -> None:
        block = self.found.get("cosmology")
        when = self.spec.cosmology_when
        if block is not None:
            for key, what in cosmology_faults(block):
                self.fault(what, "cosmology", *[key][: bool(key)])
        elif when is not None and _all_match(when, meta):
            with_keys = " and ".join(f"{name}: {meta[name]}" for name in when)
            which = f"{self.spec.quantity} {f'with {with_keys} ' if with_keys else ''}"
            self.fault(
                f"meta lacks 'cosmology', which {which}depends on, "
                "must be a mapping such as {H0: 70.0, Om0: 0.3}",
                "cosmology",
            )

    def none_of(self, names: Sequence[str], why: str) -> None:
        for name in names:
            if self.found.get(name) is not None:
                self.fault(f"{name} {why}", name)

    def likelihood(self, meta: Mapping[str, Any], counts: bool) -> str:
        found = str(meta["likelihood"])
        if counts:
            return "poisson"
        if found == "lognormal" and any(v.logarithmic for v in self.spec.values.values()):
            self.fault("likelihood is 'lognormal', but the errors are in dex already", "likelihood")
        return found


def _all_match(when: Mapping[str, tuple[str, ...]], meta: Mapping[str, Any]) -> bool:
    return all(meta.get(name) in allowed for name, allowed in when.items())


def _distribution_fault(spec: Mapping[str, Any]) -> str:
    """Return what is wrong with a distribution of positive values; empty where nothing is."""
    try:
        positive(spec)
    except ValueError as error:
        return " ".join(str(error).split())
    return ""


def _good(key: MetaKey, found: Any) -> bool:
    if key.kind == "choice":
        return isinstance(found, str) and found in key.choices
    if key.kind == "distribution":
        return isinstance(found, Mapping) and not _distribution_fault(found)
    if key.kind == "text":
        return isinstance(found, str) and bool(found.strip())
    return is_number(found) and key.allows(float(found))
