"""Write every derived table of an analysis."""

from pathlib import Path

from fogline.jobs import job, settings_of

with job(snakemake.log[0]) as log:
    from fogline.deriving import derive_tables
    from fogline.response_file import load_fit

    fit = load_fit(snakemake.input.response, settings_of(snakemake))
    notes = derive_tables(fit, snakemake.input.posterior, Path(snakemake.output[0]).parent)
    print(*notes, sep="\n", file=log)
