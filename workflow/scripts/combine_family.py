"""Weigh and combine the models of a family."""

from pathlib import Path

from fogline.jobs import job

with job(snakemake.log[0]):
    from fogline.trust.families import write_family

    write_family(
        snakemake.wildcards.family,
        snakemake.params.members,
        snakemake.input.responses,
        snakemake.input.posteriors,
        snakemake.input.convergence,
        tables=Path(snakemake.output.tables[0]).parent,
        figure=Path(snakemake.output.pdf).with_suffix(""),
    )
