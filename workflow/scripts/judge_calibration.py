"""Judge the ranks of all simulated truths of an analysis."""

from pathlib import Path

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.response_file import load_fit
    from fogline.trust.calibration import write_calibration

    write_calibration(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        snakemake.wildcards.mode,
        snakemake.input.batches,
        table=snakemake.output.table,
        figure=Path(snakemake.output.pdf).with_suffix(""),
    )
