"""Calibration by simulation, in batches that are independent jobs; made on request."""


rule calibrate:
    input:
        response="results/{analysis}/response.h5",
        posterior="results/{analysis}/posterior.nc",
        sides=lambda wildcards: analysis_of(wildcards).derive.side_files,
    output:
        batch="results/{analysis}/calibration/{mode}/{batch}.json",
    log:
        "logs/calibrate/{analysis}_{mode}_{batch}.log",
    resources:
        mem_mb=1500,
        runtime=60,
    params:
        calibration=lambda wildcards: settings_hash(
            analysis_of(wildcards).checks.calibration
        ),
        code=code_hash("fogline.trust.calibration"),
    script:
        "../scripts/calibrate.py"


rule judge_calibration:
    input:
        response="results/{analysis}/response.h5",
        batches=calibration_batches,
    output:
        table="results/{analysis}/tables/calibration_{mode}.ecsv",
        pdf="results/{analysis}/figures/calibration_{mode}.pdf",
        png=report(
            "results/{analysis}/figures/calibration_{mode}.png",
            caption="../report/calibration.rst",
            category="{analysis}",
            subcategory="Calibration",
            labels={"figure": "calibration, {mode}"},
        ),
    log:
        "logs/judge_calibration/{analysis}_{mode}.log",
    resources:
        mem_mb=1000,
        runtime=10,
    params:
        false_alarm=lambda wildcards: analysis_of(wildcards).checks.false_alarm,
        code=code_hash("fogline.trust.calibration"),
    script:
        "../scripts/judge_calibration.py"


# On request: snakemake --cores all calibration
rule calibration:
    input:
        [
            f"results/{analysis}/figures/calibration_{mode}.pdf"
            for analysis in ANALYSES
            for mode in STUDY.analyses[analysis].checks.calibration.modes
        ],
    localrule: True
