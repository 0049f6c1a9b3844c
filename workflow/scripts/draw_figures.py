"""Draw every figure of an analysis."""

from pathlib import Path

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.drawing import draw_figures
    from fogline.response_file import load_fit

    draw_figures(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        posterior=snakemake.input.posterior,
        convergence=snakemake.input.convergence,
        tables=snakemake.input.tables,
        ensembles=snakemake.input.ensembles,
        directory=Path(snakemake.output.pdf[0]).parent,
    )
