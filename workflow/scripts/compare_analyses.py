"""Compare the derived quantities of all analyses."""

from pathlib import Path

from fogline.jobs import job

with job(snakemake.log[0]):
    from fogline.drawing import write_comparison

    write_comparison(
        snakemake.params.analyses,
        snakemake.input.tables,
        snakemake.input.convergence,
        snakemake.input.responses,
        snakemake.input.posteriors,
        overlays=snakemake.params.overlays,
        table=snakemake.output.table,
        figures=Path(snakemake.output.pdf[0]).parent,
    )
