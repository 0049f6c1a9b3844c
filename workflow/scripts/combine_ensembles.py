"""Bring the ensembles of an analysis together: verdict, posterior, parameters."""

from fogline.jobs import job, settings_of

with job(snakemake.log[0]) as log:
    from fogline.chains import EnsembleResult
    from fogline.combining import combine_ensembles
    from fogline.response_file import load_fit

    combine_ensembles(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        [EnsembleResult.load(path) for path in snakemake.input.ensembles],
        posterior=snakemake.output.posterior,
        convergence=snakemake.output.convergence,
        parameters=snakemake.output.parameters,
        log=log,
    )
