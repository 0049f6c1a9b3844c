"""Sample one ensemble of an analysis."""

from fogline.jobs import job, settings_of

with job(snakemake.log[0]) as log:
    from fogline.response_file import load_fit
    from fogline.sampling import sample_ensemble

    sample_ensemble(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        int(snakemake.wildcards.ensemble),
        output=snakemake.output.ensemble,
        checkpoints=snakemake.params.checkpoints,
        log=log,
    )
