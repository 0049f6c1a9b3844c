"""Settings of a study as frozen, typed objects; `fogline.config` makes them from a config file.

Light on purpose: the workflow imports this at every start, so nothing here pulls in numpy, scipy
or astropy.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

BACKGROUNDS = ("photoionization_rate", "mean_intensity", "emissivity")
"""Kinds of tables from which sources or their background follow."""

DEFAULT_OVERLAYS = (
    "column_distribution",
    "lya_opacity",
    "incidence/lx_lls_tau2",
    "incidence/lx_dla",
    "mean_free_path/local",
    "mean_free_path/unit_depth",
    "hi_density/rho_hi",
)
"""Quantities of which the bands of all analyses are drawn over one another."""

Distribution = Mapping[str, Any]
"""A scipy distribution by name and arguments, e.g. ``{dist: norm, loc: 1.5, scale: 1.5}``."""


@dataclass(frozen=True)
class CosmologySettings:
    """Cosmology in which results are quoted (`fogline.cosmology.Cosmology` takes the same)."""

    H0: float
    Om0: float
    Ode0: float | None = None


@dataclass(frozen=True)
class EvolutionSettings:
    """Exponents of the redshift evolution: where they sit and their prior."""

    pivots: tuple[float, ...]
    priors: tuple[Distribution, ...]  # one per evolution pivot
    breaks: tuple[float, ...] = ()  # redshifts at which every exponent changes


@dataclass(frozen=True)
class HighColumnSettings:
    """A form of f in place of the spline above its last pivot."""

    form: str
    top: float  # highest column at which f is defined
    priors: tuple[Distribution, ...]  # one per shape parameter


@dataclass(frozen=True)
class SplinePriorSettings:
    """Prior of the spline: f at one pivot, then the logarithmic slopes away from it.

    ``slope_kind`` is ``walk`` (each slope is its neighbour's plus a step, kept positive) or
    ``independent`` (every slope has the prior `first_slope`, cut to positive values).
    """

    anchor_log_nhi: float
    anchor: Distribution
    slope_kind: str
    first_slope: Distribution
    slope_step: Distribution | None


@dataclass(frozen=True)
class ModelSettings:
    """The column-density distribution: pivots, evolution, priors, Doppler parameter."""

    reference_redshift: float
    pivots: tuple[float, ...]
    evolution: EvolutionSettings
    prior: SplinePriorSettings
    # {dist: fixed, b: 26.0}, {dist: hui_rutledge, b_sigma: 24.0} or scipy; an argument that is
    # itself a distribution is a free parameter with that prior.
    doppler: Mapping[str, Any]
    high_column: HighColumnSettings | None = None

    @property
    def column_range(self) -> tuple[float, float]:
        """Lowest and highest column at which f is defined [dex of cm^-2]."""
        return self.pivots[0], self.high_column.top if self.high_column else self.pivots[-1]


@dataclass(frozen=True)
class SamplerSettings:
    """Ensembles, their warm-up, and when to stop."""

    walkers: int
    ensembles: int
    seed: int
    target_ess: int  # bulk and tail, all ensembles together
    max_rhat: float
    max_steps: int  # counted steps of one ensemble after its warm-up
    thin: int  # every thin-th step is stored
    warm_up: tuple[int, ...]  # steps of each warm-up round
    components: tuple[int, ...]  # mixture components fitted after each round
    independence_share: float  # share of independence proposals after the first round


@dataclass(frozen=True)
class DeriveSettings:
    """Grids of the derived tables and the number of posterior draws behind their bands."""

    redshifts: tuple[float, ...]
    column_redshifts: tuple[float, ...]  # redshifts of tables that run along log N
    draws: int
    source_redshifts: tuple[float, ...] = (2.5, 3.0, 3.5, 4.0)
    rest_wavelengths: tuple[float, ...] = tuple(range(600, 1260, 20))  # at the source [Angstrom]
    sightlines: int = 2000  # drawn for each filter and source
    # Files, or mappings {name, lo, hi, frame}.
    filters: tuple[Any, ...] = ({"name": "lyc_880_910", "lo": 880.0, "hi": 910.0, "frame": "rest"},)
    opacity_wavelengths: tuple[float, ...] = (912.0, 700.0, 500.0)  # at the absorber [Angstrom]
    # One file under photoionization_rate, mean_intensity or emissivity (or none of them), and
    # spectral_index, x_max of the sources.
    background: Mapping[str, Any] = field(
        default_factory=lambda: {"spectral_index": 1.7, "x_max": 4.0}
    )
    helium_factor: float = 1.3  # of Ω_gas
    dust: Mapping[str, Any] | None = None  # arguments of fogline.dust.DustModel

    @property
    def side_files(self) -> tuple[str, ...]:
        """Tables that the derived quantities need beside the posterior."""
        given = [self.background[kind] for kind in BACKGROUNDS if self.background.get(kind)]
        return (*(item for item in self.filters if isinstance(item, str)), *given)

    @property
    def background_kind(self) -> str:
        """Kind of background or emissivity that is given; empty where none is."""
        return next((kind for kind in BACKGROUNDS if self.background.get(kind)), "")


@dataclass(frozen=True)
class CalibrationSettings:
    """Calibration by simulation."""

    replicates: int = 200
    batch: int = 5  # replicates of one job
    draws: int = 99  # among which the truth is ranked
    modes: tuple[str, ...] = ("prior", "posterior")


@dataclass(frozen=True)
class ChecksSettings:
    """How a fit is questioned."""

    false_alarm: float = 0.05  # chance that consistent data raise any flag
    # Data sets that are left out together, by the name of their group.
    groups: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    calibration: CalibrationSettings = field(default_factory=CalibrationSettings)
    nested: bool = False  # a nested sampler beside the tempered populations


@dataclass(frozen=True)
class CandidateSettings:
    """Rows that somebody might measure, to be forecast; `fogline.trust.candidates` reads them."""

    name: str
    quantity: str
    meta: Mapping[str, Any]  # as a constraint file of the quantity has it
    unit: str  # of value and errors; empty where dimensionless
    # Each with z or z_lo, z_hi, columns or wavelengths, and error, relative_error or path.
    rows: tuple[Mapping[str, Any], ...]


@dataclass(frozen=True)
class AnalysisSettings:
    """One named fit: data sets, model, sampler, derived quantities."""

    name: str
    datasets: tuple[str, ...]
    cosmology: CosmologySettings
    model: ModelSettings
    sampler: SamplerSettings
    derive: DeriveSettings
    # By data set: scale, scatter, student_dof, as the file's meta may state them too.
    nuisances: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    checks: ChecksSettings = field(default_factory=ChecksSettings)
    on_request: bool = False  # no part of the default run
    forecasts: tuple[CandidateSettings, ...] = ()


@dataclass(frozen=True)
class Study:
    """Every analysis of one config, in the order of the file."""

    analyses: Mapping[str, AnalysisSettings]
    overlays: tuple[str, ...] = DEFAULT_OVERLAYS  # table/curve
    compare_with: str | None = None  # a previous results folder
    families: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    raw: Mapping[str, Any] = field(repr=False, default_factory=dict)


def analysis_from_plain(plain: Mapping[str, Any]) -> AnalysisSettings:
    """Return the settings that `dataclasses.asdict` and JSON turned into plain values.

    Parameters
    ----------
    plain : mapping
        As read from JSON: lists where the settings have tuples.
    """
    model = {key: _tupled(value) for key, value in plain["model"].items()}
    model["evolution"] = EvolutionSettings(**{k: _tupled(v) for k, v in model["evolution"].items()})
    model["prior"] = SplinePriorSettings(**model["prior"])
    if model.get("high_column"):
        high = {k: _tupled(v) for k, v in model["high_column"].items()}
        model["high_column"] = HighColumnSettings(**high)
    return AnalysisSettings(
        name=plain["name"],
        datasets=tuple(plain["datasets"]),
        cosmology=CosmologySettings(**plain["cosmology"]),
        model=ModelSettings(**model),
        sampler=SamplerSettings(**{k: _tupled(v) for k, v in plain["sampler"].items()}),
        derive=DeriveSettings(**{k: _tupled(v) for k, v in plain["derive"].items()}),
        nuisances=plain.get("nuisances", {}),
        checks=_checks(plain.get("checks", {})),
        on_request=bool(plain.get("on_request", False)),
        forecasts=tuple(
            CandidateSettings(**{k: _tupled(v) for k, v in candidate.items()})
            for candidate in plain.get("forecasts", ())
        ),
    )


def _checks(plain: Mapping[str, Any]) -> ChecksSettings:
    groups = {name: tuple(members) for name, members in plain.get("groups", {}).items()}
    calibration = {k: _tupled(v) for k, v in plain.get("calibration", {}).items()}
    own = {"groups": groups, "calibration": CalibrationSettings(**calibration)}
    return ChecksSettings(**{**plain, **own})


def _tupled(value: Any) -> Any:
    return tuple(value) if isinstance(value, list) else value
