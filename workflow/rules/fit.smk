rule sample_ensemble:
    input:
        response="results/{analysis}/response.h5",
    output:
        ensemble="results/{analysis}/ensembles/{ensemble}.h5",
    log:
        "logs/sample_ensemble/{analysis}_{ensemble}.log",
    threads: 1
    resources:
        mem_mb=1000,
        runtime=60,
    params:
        sampler=lambda wildcards: settings_hash(analysis_of(wildcards).sampler),
        code=code_hash("fogline.sampling"),
        # Not an output: it must survive a job that is killed.
        checkpoints="results/{analysis}/checkpoints",
    script:
        "../scripts/sample_ensemble.py"


rule combine_ensembles:
    input:
        response="results/{analysis}/response.h5",
        ensembles=ensembles_of,
    output:
        posterior="results/{analysis}/posterior.nc",
        convergence="results/{analysis}/convergence.json",
        parameters="results/{analysis}/tables/parameters.ecsv",
    log:
        "logs/combine_ensembles/{analysis}.log",
    resources:
        mem_mb=2000,
        runtime=20,
    params:
        sampler=lambda wildcards: settings_hash(analysis_of(wildcards).sampler),
        code=code_hash("fogline.combining"),
    script:
        "../scripts/combine_ensembles.py"
