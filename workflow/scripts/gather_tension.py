"""Gather hold-outs and kinds fitted alone into tables and figures."""

from pathlib import Path

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.response_file import load_fit
    from fogline.trust.tension import write_tension

    write_tension(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        snakemake.input.hold_outs,
        snakemake.input.alone,
        tables=Path(snakemake.output.tables[0]).parent,
        figures=Path(snakemake.output.pdf[0]).parent,
    )
