"""The same posterior by other samplers; made on request."""


rule temper_populations:
    input:
        response="results/{analysis}/response.h5",
    output:
        draws="results/{analysis}/agreement/tempered.h5",
    log:
        "logs/temper_populations/{analysis}.log",
    resources:
        mem_mb=1000,
        runtime=30,
    params:
        sampler=lambda wildcards: settings_hash(analysis_of(wildcards).sampler),
        code=code_hash("fogline.trust.tempering"),
    script:
        "../scripts/temper_populations.py"


rule sample_nested:
    input:
        response="results/{analysis}/response.h5",
    output:
        draws="results/{analysis}/agreement/nested_{run}.h5",
    log:
        "logs/sample_nested/{analysis}_{run}.log",
    resources:
        mem_mb=1000,
        runtime=240,
    params:
        sampler=lambda wildcards: settings_hash(analysis_of(wildcards).sampler),
        code=code_hash("fogline.trust.nested"),
    script:
        "../scripts/sample_nested.py"


rule compare_samplers:
    input:
        response="results/{analysis}/response.h5",
        ensembles=ensembles_of,
        convergence="results/{analysis}/convergence.json",
        others=other_samplers,
        sides=lambda wildcards: analysis_of(wildcards).derive.side_files,
    output:
        table="results/{analysis}/tables/agreement.ecsv",
        pdf="results/{analysis}/figures/agreement.pdf",
        png=report(
            "results/{analysis}/figures/agreement.png",
            caption="../report/agreement.rst",
            category="{analysis}",
            subcategory="Calibration",
            labels={"figure": "agreement of samplers"},
        ),
    log:
        "logs/compare_samplers/{analysis}.log",
    resources:
        mem_mb=1500,
        runtime=15,
    params:
        derive=lambda wildcards: settings_hash(analysis_of(wildcards).derive),
        code=code_hash("fogline.trust.agreeing"),
    script:
        "../scripts/compare_samplers.py"


# On request: snakemake --cores all agreement
rule agreement:
    input:
        expand("results/{analysis}/figures/agreement.pdf", analysis=ANALYSES),
    localrule: True
