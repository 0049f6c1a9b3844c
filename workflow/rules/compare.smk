rule compare_analyses:
    input:
        tables=expand(
            "results/{analysis}/tables/{table}.ecsv", analysis=ANALYSES, table=TABLES
        ),
        convergence=expand("results/{analysis}/convergence.json", analysis=ANALYSES),
        responses=expand("results/{analysis}/response.h5", analysis=ANALYSES),
        posteriors=expand("results/{analysis}/posterior.nc", analysis=ANALYSES),
    output:
        table="results/comparison/tables/shifts.ecsv",
        pdf="results/comparison/figures/shifts.pdf",
        png=report(
            "results/comparison/figures/shifts.png",
            caption="../report/shifts.rst",
            category="Comparison of analyses",
            labels={"figure": "shifts"},
        ),
    log:
        "logs/compare_analyses.log",
    resources:
        mem_mb=1000,
        runtime=10,
    params:
        analyses=ANALYSES,
        code=code_hash("fogline.drawing"),
    script:
        "../scripts/compare_analyses.py"
