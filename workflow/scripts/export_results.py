"""Write the files of an analysis that other programs read."""

from pathlib import Path

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.deriving import export_results
    from fogline.response_file import load_fit

    fit = load_fit(snakemake.input.response, settings_of(snakemake))
    export_results(
        fit,
        posterior=snakemake.input.posterior,
        parameters=snakemake.input.parameters,
        directory=Path(snakemake.output[0]).parent,
    )
