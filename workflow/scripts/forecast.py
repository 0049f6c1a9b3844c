"""Forecast what candidate measurements would bring."""

from pathlib import Path

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.response_file import load_fit
    from fogline.trust.forecasting import write_forecast

    write_forecast(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        snakemake.input.posterior,
        table=snakemake.output.table,
        figure=Path(snakemake.output.pdf).with_suffix(""),
    )
