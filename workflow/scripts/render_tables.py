"""Render the tables of an analysis as pages for the report."""

from fogline.jobs import job

with job(snakemake.log[0]):
    from fogline.html import render_table

    for table, page in zip(snakemake.input, snakemake.output, strict=True):
        render_table(table, page)
