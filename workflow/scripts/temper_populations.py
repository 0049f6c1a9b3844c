"""Sample a posterior by another method than ensembles."""

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.response_file import load_fit
    from fogline.trust.agreeing import write_tempered

    write_tempered(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        snakemake.output.draws,
    )
