"""What the constraint file of each quantity must hold (`fogline.quantities.spec` has the types)."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

from fogline.quantities.spec import FileSpec, MetaKey, ValueColumn

LOG_NHI_RANGE: Final = (8.0, 26.0)
"""Columns that a file may speak of [dex of cm^-2]: generous, to catch N for log N."""

LOG_F_RANGE: Final = (-60.0, 0.0)
"""Values of log10 f [dex of cm^2] that a file may hold: generous, to catch f for log f."""


def _log_nhi_key(end: str, help: str, required: bool, example: float) -> MetaKey:
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


_PER: Final = MetaKey(
    "per",
    "choice",
    "path that the numbers are per: dz (redshift) or dX (absorption distance; needs cosmology)",
    choices=("dz", "dX"),
    example="dz",
)

LYA_OPACITY: Final = FileSpec(
    quantity="lya_opacity",
    description="Effective optical depth of the Lyα forest, mean flux, or flux decrement.",
    meta=(
        MetaKey(
            "form",
            "choice",
            "what the numbers are: tau (-ln mean flux), mean_flux, decrement (1 - mean flux)",
            choices=("tau", "mean_flux", "decrement"),
            example="tau",
        ),
        _log_nhi_key("min", "lowest column counted", True, 12.0),
        _log_nhi_key("max", "highest column counted (optically thick ones removed?)", True, 17.2),
    ),
    values={
        "tau": ValueColumn(example=0.25, example_err=0.02, help="effective optical depth"),
        "mean_flux": ValueColumn(
            maximum=1.0, example=0.78, example_err=0.02, help="mean transmitted flux"
        ),
        "decrement": ValueColumn(
            maximum=1.0, example=0.22, example_err=0.02, help="1 - mean transmitted flux"
        ),
    },
    form_key="form",
)

LLS_INCIDENCE: Final = FileSpec(
    quantity="lls_incidence",
    description="Number of absorbers above a column (or optical depth at 912 Å) per unit path.",
    meta=(
        _PER,
        MetaKey(
            "tau_min",
            "number",
            "lowest optical depth at 912 Å counted",
            minimum=0.0,
            exclusive=True,
            required=False,
            example=2.0,
        ),
        _log_nhi_key("min", "lowest column counted", False, 17.5),
        _log_nhi_key("max", "highest column counted", False, 20.3),
    ),
    values={"": ValueColumn(example=1.6, example_err=0.2, help="absorbers per unit path")},
    counts=True,
    cosmology_when={"per": ("dX",)},
    exactly_one_of=(("tau_min", "log_nhi_min"),),
)

MEAN_FREE_PATH: Final = FileSpec(
    quantity="mean_free_path",
    description="Mean free path of photons at the Lyman limit.",
    meta=(
        MetaKey(
            "definition",
            "choice",
            "local (inverse of the opacity at 912 Å at that redshift) or unit_depth (distance "
            "from a source at z at which the optical depth reaches 1)",
            choices=("local", "unit_depth"),
            example="local",
        ),
        MetaKey(
            "frame",
            "choice",
            "frame of the length",
            choices=("proper", "comoving"),
            example="proper",
        ),
    ),
    values={
        "": ValueColumn(
            units=("Mpc", "Mpc / littleh"),
            example=120.0,
            example_err=15.0,
            example_unit="Mpc",
            help="length",
        )
    },
    cosmology_when={},
)

COLUMN_DISTRIBUTION: Final = FileSpec(
    quantity="column_distribution",
    description="Column-density distribution f(N): absorbers per unit column and path, in bins.",
    meta=(_PER,),
    values={
        "": ValueColumn(
            name="log_f",
            logarithmic=True,
            minimum=LOG_F_RANGE[0],
            maximum=LOG_F_RANGE[1],
            example=-21.7,
            example_err=0.1,
            help="log10 of f [cm^2] averaged over the bin, errors in dex",
        )
    },
    counts=True,
    column_bins=True,
    cosmology_when={"per": ("dX",)},
)

HI_DENSITY: Final = FileSpec(
    quantity="hi_density",
    description="Cosmic density of neutral hydrogen.",
    meta=(
        MetaKey(
            "form",
            "choice",
            "rho_hi (comoving mass density), omega_hi (in units of today's critical density), "
            "omega_gas (omega_hi times helium_factor)",
            choices=("rho_hi", "omega_hi", "omega_gas"),
            example="omega_hi",
        ),
        MetaKey(
            "helium_factor",
            "number",
            "mass of all gas over that of its hydrogen (form omega_gas only)",
            minimum=1.0,
            maximum=2.0,
            required_when={"form": ("omega_gas",)},
            example=1.3,
        ),
        _log_nhi_key("min", "lowest column counted", True, 20.3),
        _log_nhi_key("max", "highest column counted", False, 22.0),
    ),
    values={
        "rho_hi": ValueColumn(
            units=("Msun / Mpc3",),
            example=9.0e7,
            example_err=1.0e7,
            example_unit="Msun / Mpc3",
            help="comoving mass density",
        ),
        "omega_hi": ValueColumn(
            maximum=1.0, example=6.6e-4, example_err=0.7e-4, help="density over the critical one"
        ),
        "omega_gas": ValueColumn(
            maximum=1.0, example=8.6e-4, example_err=0.9e-4, help="density over the critical one"
        ),
    },
    form_key="form",
    cosmology_when={},
)

FILE_SPECS: Final[Mapping[str, FileSpec]] = {
    spec.quantity: spec
    for spec in (LYA_OPACITY, LLS_INCIDENCE, MEAN_FREE_PATH, COLUMN_DISTRIBUTION, HI_DENSITY)
}
"""Every quantity's file by the quantity's name."""
