"""A plausible model and small data sets, in code, for tests that need a whole fit."""

from __future__ import annotations

import dataclasses

import numpy as np

from fogline.cosmology import Cosmology
from fogline.datasets import hypothetical
from fogline.distribution import ColumnDistribution
from fogline.priors import Prior
from fogline.quantities import Setting
from fogline.settings import (
    AnalysisSettings,
    CosmologySettings,
    DeriveSettings,
    EvolutionSettings,
    ModelSettings,
    SamplerSettings,
    SplinePriorSettings,
)

PIVOTS = (12.0, 13.5, 15.0, 16.2, 17.5, 19.0, 20.3, 21.0, 21.6, 22.5)
EVOLUTION_PIVOTS = (14.0, 17.5, 20.3)
LOG_F = (-9.7, -11.65, -14.3, -16.5, -18.5, -20.15, -21.6, -22.6, -23.75, -26.5)
EXPONENTS = (1.9, 2.0, 0.6)
THETA = np.array([*LOG_F, *EXPONENTS])
EDGES = (20.3, 20.6, 21.0, 21.5, 22.2)

MODEL = ModelSettings(
    reference_redshift=2.5,
    pivots=PIVOTS,
    evolution=EvolutionSettings(
        EVOLUTION_PIVOTS, ({"dist": "norm", "loc": 1.5, "scale": 1.5},) * 3
    ),
    prior=SplinePriorSettings(
        anchor_log_nhi=20.3,
        anchor={"dist": "norm", "loc": -21.5, "scale": 1.0},
        slope_kind="walk",
        first_slope={"dist": "norm", "loc": 1.7, "scale": 0.5},
        slope_step={"dist": "norm", "loc": 0.0, "scale": 0.5},
    ),
    doppler={"dist": "fixed", "b": 26.0},
)
COSMOLOGY = CosmologySettings(70.0, 0.3)
SETTING = Setting(ColumnDistribution.from_settings(MODEL), Cosmology(70.0, 0.3), MODEL.doppler)
PRIOR = Prior(MODEL)
SAMPLER = SamplerSettings(
    walkers=128,
    ensembles=2,
    seed=7,
    target_ess=1000,
    max_rhat=1.02,
    max_steps=2000,
    thin=1,
    warm_up=(400, 200, 200, 200),
    components=(4, 6, 8, 8),
    independence_share=0.5,
)
ANALYSIS = AnalysisSettings(
    name="small",
    datasets=("lya.ecsv",),
    cosmology=COSMOLOGY,
    model=MODEL,
    sampler=SAMPLER,
    derive=DeriveSettings((2.0, 3.0, 4.0), (2.5, 3.5), 50),
)


def measured(data, observed, error=0.1):
    """Return rows with values and relative errors."""
    observed = np.asarray(observed, dtype=float)
    err = np.abs(observed) * error
    return dataclasses.replace(data, observed=observed, err_lo=err, err_hi=1.2 * err)


def in_bins(data, edges, **changes):
    """Return rows of the column distribution in bins between neighbouring edges."""
    edges = np.asarray(edges, dtype=float)
    return dataclasses.replace(data, log_nhi_lo=edges[:-1], log_nhi_hi=edges[1:], **changes)


def empty_datasets():
    """Return one small data set of every quantity, without observed values."""
    bins = hypothetical("column_distribution", [2.6] * 4, per="dX")
    data = [
        hypothetical("lya_opacity", [2.2, 3.0], form="tau", log_nhi_min=12.0, log_nhi_max=17.2),
        hypothetical("lls_incidence", [2.4, 3.5], per="dz", tau_min=2.0),
        hypothetical("mean_free_path", [2.44, 4.0], unit="Mpc", definition="local", frame="proper"),
        hypothetical("mean_free_path", [4.0], unit="Mpc", definition="unit_depth", frame="proper"),
        in_bins(bins, EDGES, counts=True, search_path=np.full(4, 4000.0)),
        hypothetical("hi_density", [2.5], form="omega_hi", log_nhi_min=20.3),
    ]
    names = ("lya", "lls", "local", "unit_depth", "dla", "density")
    return [
        dataclasses.replace(d, name=name, path=f"{name}.ecsv")
        for d, name in zip(data, names, strict=True)
    ]
