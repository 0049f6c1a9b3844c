"""What candidate measurements would bring, where a config names any."""


rule forecast:
    input:
        response="results/{analysis}/response.h5",
        posterior="results/{analysis}/posterior.nc",
        sides=lambda wildcards: analysis_of(wildcards).derive.side_files,
    output:
        table="results/{analysis}/tables/forecast.ecsv",
        pdf="results/{analysis}/figures/forecast.pdf",
        png=report(
            "results/{analysis}/figures/forecast.png",
            caption="../report/forecast.rst",
            category="{analysis}",
            subcategory="Forecasts",
            labels={"figure": "forecast"},
        ),
    log:
        "logs/forecast/{analysis}.log",
    resources:
        mem_mb=1500,
        runtime=10,
    params:
        candidates=lambda wildcards: settings_hash(analysis_of(wildcards).forecasts),
        derive=lambda wildcards: settings_hash(analysis_of(wildcards).derive),
        code=code_hash("fogline.trust.forecasting"),
    script:
        "../scripts/forecast.py"
