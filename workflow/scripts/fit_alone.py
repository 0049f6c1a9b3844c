"""Fit the data sets of one kind alone."""

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.response_file import load_fit
    from fogline.trust.tension import write_alone

    write_alone(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        snakemake.params.kinds,
        snakemake.wildcards.kind,
        snakemake.output.found,
    )
