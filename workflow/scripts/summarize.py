"""Write the page of an analysis that is read first."""

from pathlib import Path

from fogline.jobs import job

with job(snakemake.log[0]):
    from fogline.summary import read_summary
    from fogline.summary_page import write_pages

    folder = Path(snakemake.input.convergence).parent
    write_pages(read_summary(folder), folder, snakemake.output.page, snakemake.output.text)
