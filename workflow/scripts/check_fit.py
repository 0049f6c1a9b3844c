"""Question the fit of an analysis: predictive checks, discrepancies, information."""

from pathlib import Path

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.response_file import load_fit
    from fogline.trust.checking import write_checks

    fit = load_fit(snakemake.input.response, settings_of(snakemake))
    write_checks(fit, snakemake.input.posterior, Path(snakemake.output[0]).parent)
