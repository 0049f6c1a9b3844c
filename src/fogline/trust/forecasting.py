"""Forecasts of an analysis, from its posterior file to table and figure."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from fogline.deriving import make_draws
from fogline.figures import save
from fogline.figures.forecast import draw_forecast
from fogline.headlines import headline_draws
from fogline.posterior_file import read_draws
from fogline.response_file import Fit
from fogline.tables import write_table
from fogline.trust.candidates import forecast_candidates, read_candidates
from fogline.trust.forecast import forecast_table

DRAWS = 4000
"""Posterior draws that are weighted."""

STREAM = 1_000_133
"""Spawn key of the random stream of outcomes."""


def write_forecast(
    fit: Fit, posterior: str | Path, *, table: str | Path, figure: str | Path
) -> None:
    """Write what every candidate would bring.

    Parameters
    ----------
    fit : Fit
        With at least one candidate in its settings.
    posterior : path-like
        Posterior file.
    table, figure : path-like
        ECSV file; figure without suffix.

    Raises
    ------
    InputError
        With every fault of the candidates.
    """
    theta = read_draws(posterior, DRAWS)
    quantities = headline_draws(make_draws(theta, fit.setting, fit.analysis)).by_key()
    seed = np.random.SeedSequence(fit.analysis.sampler.seed, spawn_key=(STREAM,))
    results = forecast_candidates(
        read_candidates(fit.analysis),
        fit.setting,
        theta,
        quantities,
        np.random.default_rng(seed),
    )
    made = forecast_table(results)
    write_table(made, table, **fit.table_meta(), draws=len(theta))
    save(draw_forecast(made), figure)
