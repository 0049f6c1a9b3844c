"""Compare the ensembles of an analysis with other samplers."""

from pathlib import Path

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.response_file import load_fit
    from fogline.trust.agreeing import write_agreement

    write_agreement(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        snakemake.input.ensembles,
        snakemake.input.convergence,
        snakemake.input.others,
        table=snakemake.output.table,
        figure=Path(snakemake.output.pdf).with_suffix(""),
    )
