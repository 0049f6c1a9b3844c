rule build_response:
    input:
        datasets=lambda wildcards: analysis_of(wildcards).datasets,
        linked=lambda wildcards: [
            linked
            for path in analysis_of(wildcards).datasets
            for linked in linked_files(path)
        ],
    output:
        response="results/{analysis}/response.h5",
    log:
        "logs/build_response/{analysis}.log",
    resources:
        mem_mb=1000,
        runtime=10,
    params:
        model=lambda wildcards: settings_hash(
            analysis_of(wildcards).model,
            analysis_of(wildcards).cosmology,
            analysis_of(wildcards).nuisances,
        ),
        code=code_hash("fogline.response_file", "fogline.constraint_files"),
    script:
        "../scripts/build_response.py"
