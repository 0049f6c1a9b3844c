"""Compare the derived quantities of all analyses."""

from fogline.jobs import job

with job(snakemake.log[0]):
    from fogline.drawing import write_comparison

    write_comparison(
        snakemake.params.analyses,
        snakemake.input.tables,
        snakemake.input.convergence,
        snakemake.input.responses,
        snakemake.input.posteriors,
        table=snakemake.output.table,
        figure=snakemake.output.pdf,
    )
