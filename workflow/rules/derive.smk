rule derive_tables:
    input:
        response="results/{analysis}/response.h5",
        posterior="results/{analysis}/posterior.nc",
        sides=lambda wildcards: analysis_of(wildcards).derive.side_files,
    output:
        expand("results/{{analysis}}/tables/{table}.ecsv", table=DERIVED),
    log:
        "logs/derive_tables/{analysis}.log",
    resources:
        mem_mb=2000,
        runtime=20,
    params:
        derive=lambda wildcards: settings_hash(analysis_of(wildcards).derive),
        code=code_hash("fogline.deriving"),
    script:
        "../scripts/derive_tables.py"


rule check_fit:
    input:
        response="results/{analysis}/response.h5",
        posterior="results/{analysis}/posterior.nc",
        sides=lambda wildcards: analysis_of(wildcards).derive.side_files,
    output:
        expand("results/{{analysis}}/tables/{table}.ecsv", table=CHECKS),
    log:
        "logs/check_fit/{analysis}.log",
    resources:
        mem_mb=1500,
        runtime=10,
    params:
        derive=lambda wildcards: settings_hash(analysis_of(wildcards).derive),
        false_alarm=lambda wildcards: analysis_of(wildcards).checks.false_alarm,
        code=code_hash("fogline.trust.checking"),
    script:
        "../scripts/check_fit.py"


rule export_results:
    input:
        response="results/{analysis}/response.h5",
        posterior="results/{analysis}/posterior.nc",
        parameters="results/{analysis}/tables/parameters.ecsv",
        sides=lambda wildcards: analysis_of(wildcards).derive.side_files,
    output:
        expand("results/{{analysis}}/exports/{export}", export=EXPORTS),
    log:
        "logs/export_results/{analysis}.log",
    resources:
        mem_mb=1500,
        runtime=20,
    params:
        derive=lambda wildcards: settings_hash(analysis_of(wildcards).derive),
        code=code_hash("fogline.deriving"),
    script:
        "../scripts/export_results.py"
