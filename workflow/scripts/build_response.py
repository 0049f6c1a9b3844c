"""Validate the constraint files of an analysis and compute their response."""

from fogline.jobs import job, settings_of

with job(snakemake.log[0]) as log:
    from fogline.inputs import read_inputs
    from fogline.response_file import build_fit, save_fit

    analysis = settings_of(snakemake)
    fit = build_fit(analysis, read_inputs(analysis))
    save_fit(fit, snakemake.output.response)
    print(f"{len(fit.response.datasets)} data sets, fingerprint {fit.fingerprint}", file=log)
