"""Write the posterior predictive check of an analysis."""

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.deriving import write_predictive
    from fogline.response_file import load_fit

    fit = load_fit(snakemake.input.response, settings_of(snakemake))
    write_predictive(fit, snakemake.input.posterior, snakemake.output.table)
