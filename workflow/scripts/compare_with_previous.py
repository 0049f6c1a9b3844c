"""Compare the derived quantities of all analyses with those of a previous results folder."""

from pathlib import Path

from fogline.jobs import job

with job(snakemake.log[0]):
    from fogline.drawing import write_changes

    write_changes(
        snakemake.params.analyses,
        snakemake.input.tables,
        snakemake.params.folder,
        table=snakemake.output.table,
        figure=Path(snakemake.output.pdf).with_suffix(""),
    )
