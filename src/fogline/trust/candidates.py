"""Candidates of a config's ``forecasts``: validated like constraint files, and given errors.

A candidate states what a constraint file states but for the values, which are those that the
posterior predicts. It is laid out as such a file would be, with a placeholder for every value, and
goes through the same checks of meta, units and rows; what they find is told with the place in the
config. `Candidate.at` then puts in the values: the median of the predictions of each row, and from
it the errors that were stated relative to the value.

Relative errors r. Where numbers are logarithms the error is r / ln 10 dex; where they are
log-normal it is r of ln value. Else it is r times the median prediction, and stays that in all
outcomes: right to first order in r, as for a survey that is planned for the value expected now.

Lists of single absorbers, limits and covariances can't be candidates. What a list would bring is
at least what its counts in bins bring (``path``). A candidate's ``scale`` and ``scatter`` are its
own: a calibration that it would share with a data set of the fit is not known to be shared.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass, replace
from typing import Any, Final

import numpy as np
from astropy.table import Table
from numpy.typing import ArrayLike, NDArray

from fogline.column_ranges import check_column_range
from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.distributions import positive
from fogline.ecsv_cells import RawColumn, RawRow
from fogline.ecsv_lines import RawTable
from fogline.faults import Fault, InputError, nearest
from fogline.file_columns import WAVELENGTHS, check_columns
from fogline.file_meta import check_meta
from fogline.file_rows import Rows, check_rows
from fogline.file_units import check_units
from fogline.likelihood import Likelihood
from fogline.nuisances import nuisances_of
from fogline.quantities import FILE_SPECS, Setting
from fogline.quantities.spec import FileSpec, ValueColumn
from fogline.response import build_response
from fogline.settings import AnalysisSettings, CandidateSettings
from fogline.trust.forecast import Shrinkage, expected_shrinkage
from fogline.yaml_lines import Document, Place, dotted

Array = NDArray[np.float64]

_NOT_HERE: Final = {
    "covariance": "names a file of measured rows, which a candidate has none of",
    "quantity": "stands above meta, not in it",
    "confidence": "is that of limits, which a candidate has none of",
}
"""Meta keys of constraint files that a candidate may not state."""


@dataclass(frozen=True)
class Candidate:
    """Rows that somebody might measure.

    Parameters
    ----------
    data : DataSet
        The rows; values are placeholders, and so are errors where `relative` is not NaN.
    relative : ndarray, shape (n_rows,)
        Errors relative to the value; NaN where `data` has the errors, or counts.
    """

    data: DataSet
    relative: Array

    @property
    def name(self) -> str:
        """Its name in the config."""
        return self.data.name

    def at(self, predicted: ArrayLike) -> DataSet:
        """Return the rows with the median predictions as values, and errors that go with them.

        Parameters
        ----------
        predicted : array_like, shape (n_draws, n_rows)
            Predictions of `data` for every posterior draw.
        """
        value = np.median(np.asarray(predicted, dtype=float), axis=0)
        scale = np.full(len(value), 1.0 / np.log(10.0)) if self.data.logarithmic else np.abs(value)
        stated = np.isnan(self.relative)
        error = np.where(stated, self.data.err_lo, self.relative * scale)
        return replace(self.data, observed=value, err_lo=error, err_hi=error.copy())

    def likelihood(self, predicted: ArrayLike) -> Likelihood:
        """Return the likelihood of the rows as `at` makes them."""
        return Likelihood.from_datasets([self.at(predicted)])

    def nuisance_draws(self, n_draws: int, rng: np.random.Generator) -> Array | None:
        """Return draws from the priors of its own nuisance parameters.

        Parameters
        ----------
        n_draws : int
        rng : numpy.random.Generator

        Returns
        -------
        ndarray, shape (n_draws, n_nuisances), or None
            None where it has none.
        """
        priors = [positive(nuisance.prior) for nuisance in nuisances_of([self.data])]
        if not priors:
            return None
        return np.stack([_positive_draws(prior, n_draws, rng) for prior in priors], axis=1)


def _positive_draws(prior: Any, n: int, rng: np.random.Generator) -> Array:
    """Return draws of a distribution that is cut to positive values."""
    below = float(prior.cdf(0.0))
    return np.asarray(prior.ppf(below + (1.0 - below) * rng.random(n)), dtype=float)


def forecast_candidates(
    candidates: Sequence[Candidate],
    setting: Setting,
    theta: Array,
    quantities: Mapping[str, ArrayLike],
    rng: np.random.Generator,
    n_outcomes: int = 64,
) -> dict[str, Shrinkage]:
    """Return what every candidate would bring, by its name.

    Parameters
    ----------
    candidates : sequence of Candidate
    setting : Setting
        Model and cosmology of the results.
    theta : ndarray, shape (n_draws, n_parameters or more)
        Posterior draws.
    quantities : mapping of str to array_like, shape (n_draws,)
        Derived quantities of the same draws.
    rng : numpy.random.Generator
        Each candidate has a stream of its own: leaving one out changes none of the others after it.
    n_outcomes : int
    """
    results = {}
    for candidate, stream in zip(candidates, rng.spawn(len(candidates)), strict=True):
        predicted = build_response([candidate.data], setting).predict(theta)
        results[candidate.name] = expected_shrinkage(
            predicted,
            candidate.likelihood(predicted),
            quantities,
            stream,
            n_outcomes,
            candidate.nuisance_draws(len(theta), stream),
        )
    return results


def read_candidates(
    analysis: AnalysisSettings,
    path: str = "config",
    line_of: Callable[[Place], int] = lambda place: 1,
) -> list[Candidate]:
    """Return the candidates of an analysis.

    Parameters
    ----------
    analysis : AnalysisSettings
    path : str
        The config, for the faults.
    line_of : callable
        Line of the config at which a place of the analysis's blocks stands.

    Raises
    ------
    InputError
        With every fault of all candidates.
    """
    made, placed = _read_all(analysis)
    if placed:
        raise InputError(Fault(path, line_of(place), what) for place, what in placed)
    return made


def candidate_faults(analysis: AnalysisSettings) -> Iterator[tuple[Place, str]]:
    """Give what is wrong with the candidates of an analysis.

    Parameters
    ----------
    analysis : AnalysisSettings
        From a config that is valid otherwise.

    Yields
    ------
    tuple
        Place within the blocks, and fault.
    """
    yield from _read_all(analysis)[1]


def _read_all(analysis: AnalysisSettings) -> tuple[list[Candidate], list[tuple[Place, str]]]:
    made: list[Candidate] = []
    placed: list[tuple[Place, str]] = []
    for settings in analysis.forecasts:
        sheet = _Sheet(settings, analysis)
        candidate = sheet.read()
        placed += dict.fromkeys(sheet.placed())
        if candidate is not None:
            made.append(candidate)
    return made, placed


class _Sheet:
    """One candidate laid out as a constraint file, whose lines are places of the config.

    Parameters
    ----------
    settings : CandidateSettings
    analysis : AnalysisSettings
        Its cosmology stands in where the candidate states none; its model must reach its columns.
    """

    def __init__(self, settings: CandidateSettings, analysis: AnalysisSettings) -> None:
        self.settings = settings
        self.analysis = analysis
        self.here: Place = ("forecasts", settings.name)
        self.faults: list[Fault] = []
        self._places: list[Place] = []

    def read(self) -> Candidate | None:
        """Return the candidate; None where there are faults."""
        spec = FILE_SPECS.get(self.settings.quantity)
        if spec is None:
            near = nearest(self.settings.quantity, FILE_SPECS)
            what = f"unknown quantity {self.settings.quantity!r}; {near}"
            self.fault(what, "quantity")
        elif spec.absorbers:
            what = (
                f"{spec.quantity} can't be forecast; state the absorbers as counts of "
                "column_distribution or lls_incidence, with 'path' in the rows"
            )
            self.fault(what, "quantity")
        else:
            return self._read(spec)
        return None

    def placed(self) -> Iterator[tuple[Place, str]]:
        """Give the faults with their places, worded for the config."""
        for fault in self.faults:
            place = self._places[fault.line - 1]
            what = re.sub(r"unit of column '\w+'", "unit", fault.what)
            what = re.sub(r"column '(?=(z|z_|log_nhi_|wave|path))", "key '", what)
            yield place, f"{dotted(place)}: {what}"

    def fault(self, what: str, *place: str | int) -> None:
        self.faults.append(Fault("", self._line(*place), what))

    def _line(self, *place: str | int) -> int:
        """Return the number that stands for a place below the candidate."""
        self._places.append((*self.here, *place))
        return len(self._places)

    def _read(self, spec: FileSpec) -> Candidate | None:
        counts = spec.counts and "path" in self.settings.rows[0]
        columns_good = self._check_keys(spec)
        value = next(iter(spec.values.values())) if not spec.form_key else None
        if spec.form_key:
            value = spec.values.get(str(self.settings.meta.get(spec.form_key)))
        raw, table = self._raw(spec, value, counts)
        meta = check_meta(raw, spec, counts, self.faults)
        if not (check_columns(raw, spec, self.faults) and columns_good):
            return None
        unit = self._check_unit(raw, value, counts)
        arrays = check_rows(Rows(raw, table, self.faults), spec, value, counts, meta)
        if self.faults:
            return None
        data = self._dataset(spec, meta, value, unit, counts, arrays)
        for fault in check_column_range(data, self.analysis.model.column_range):
            self.fault(fault.what)
        relative = [float(row.get("relative_error", np.nan)) for row in self.settings.rows]
        return None if self.faults else Candidate(data, np.array(relative))

    def _check_keys(self, spec: FileSpec) -> bool:
        """Check that rows have no keys that the quantity does not know."""
        before = len(self.faults)
        known = ["z", "z_lo", "z_hi", "error", "relative_error", "label"]
        known += ["path"] if spec.counts else []
        known += ["log_nhi_lo", "log_nhi_hi"] if spec.column_bins else []
        known += WAVELENGTHS if spec.wavelengths else []
        for i, row in enumerate(self.settings.rows):
            for key in row:
                if key not in known:
                    what = f"'{key}' has no meaning for {spec.quantity}; {nearest(key, known)}"
                    self.fault(what, "rows", i, key)
        for key, why in _NOT_HERE.items():
            if self.settings.meta.get(key) is not None:
                self.fault(f"{key} {why}", "meta", key)
        return len(self.faults) == before

    def _check_unit(self, raw: RawTable, value: ValueColumn | None, counts: bool) -> str:
        """Return the unit of the value."""
        stated = self.settings.unit
        if counts and stated:
            self.fault("counts have no unit", "unit")
            return ""
        if value is not None and value.units and not stated and not counts:
            must = " or ".join(value.units)
            self.fault(f"lacks 'unit' (of value and error), must be convertible to {must}")
            return ""
        return check_units(raw, value, self.faults)

    def _raw(
        self, spec: FileSpec, value: ValueColumn | None, counts: bool
    ) -> tuple[RawTable, Table]:
        """Return the candidate as the reader of constraint files would have it, and its rows."""
        name = next(iter(spec.values.values())).name
        keys = [key for key in self.settings.rows[0] if key not in ("error", "relative_error")]
        keys = [key for key in keys if key != "label"] + ["label"]
        cells = {key: [row.get(key, "") for row in self.settings.rows] for key in keys}
        if counts:
            cells["count"] = [1.0] * len(self.settings.rows)
        else:
            errors = [row.get("error", row.get("relative_error")) for row in self.settings.rows]
            cells[name] = [1.0 if value is None else value.example] * len(errors)
            cells["err"] = errors
        units = {name: self.settings.unit, "err": self.settings.unit}
        units |= {key: "Angstrom" for key in WAVELENGTHS}
        columns = tuple(
            RawColumn(
                key,
                "string" if key == "label" else "float64",
                units.get(key, ""),
                self._line("unit") if key in (name, "err") else self._line("rows"),
            )
            for key in cells
        )
        lines: dict[Place, int] = {(): self._line(), ("datatype",): self._line("rows")}
        meta = self._meta()
        lines["meta",] = self._line("meta")
        for key, found in meta.items():
            lines["meta", key] = self._line("meta", key)
            if isinstance(found, Mapping):
                lines |= {("meta", key, inner): self._line("meta", key, inner) for inner in found}
        rows = [
            RawRow(self._line("rows", i), "", tuple(str(column[i]) for column in cells.values()))
            for i in range(len(self.settings.rows))
        ]
        header = Document({"meta": meta}, lines)
        table = Table({key: np.array(column) for key, column in cells.items()})
        return RawTable("", header, columns, self._line("rows"), rows, 0, ()), table

    def _meta(self) -> dict[str, Any]:
        """Return the meta of the file, with what a candidate need not say."""
        cosmology = {k: v for k, v in asdict(self.analysis.cosmology).items() if v is not None}
        stated = {key: item for key, item in self.settings.meta.items() if key not in _NOT_HERE}
        implied = {"source": "forecast", "cosmology": cosmology}
        return {**implied, **stated, "quantity": self.settings.quantity}

    def _dataset(
        self,
        spec: FileSpec,
        meta: Mapping[str, Any],
        value: ValueColumn | None,
        unit: str,
        counts: bool,
        arrays: Mapping[str, Any],
    ) -> DataSet:
        block = self._meta()["cosmology"]
        return DataSet(
            name=self.settings.name,
            path="",
            quantity=spec.quantity,
            meta=meta,
            unit=unit,
            counts=counts,
            cosmology=Cosmology(**{k: float(x) for k, x in block.items() if x is not None}),
            logarithmic=value is not None and value.logarithmic and not counts,
            **{**arrays, "lines": (0,) * len(self.settings.rows)},
        )
