"""Make one batch of simulated truths, data and fits."""

from fogline.jobs import job, settings_of

with job(snakemake.log[0]):
    from fogline.posterior_file import read_coordinates
    from fogline.response_file import load_fit
    from fogline.trust.calibration import JOINT_DRAWS, write_batch

    write_batch(
        load_fit(snakemake.input.response, settings_of(snakemake)),
        snakemake.wildcards.mode,
        int(snakemake.wildcards.batch),
        read_coordinates(snakemake.input.posterior, JOINT_DRAWS),
        snakemake.output.batch,
    )
