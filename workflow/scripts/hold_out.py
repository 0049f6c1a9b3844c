"""Leave one group of data sets out."""

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.response_file import load_fit
    from fogline.trust.tension import write_hold_out

    write_hold_out(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        snakemake.input.posterior,
        snakemake.wildcards.group,
        snakemake.params.members,
        snakemake.output.found,
    )
