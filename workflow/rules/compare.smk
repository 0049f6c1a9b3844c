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
        pdf=expand(
            "results/comparison/figures/{figure}.pdf", figure=["shifts", "overlays"]
        ),
        png=[
            report(
                f"results/comparison/figures/{figure}.png",
                caption=f"../report/{figure}.rst",
                category="Comparison of analyses",
                labels={"figure": figure},
            )
            for figure in ("shifts", "overlays")
        ],
    log:
        "logs/compare_analyses.log",
    resources:
        mem_mb=1500,
        runtime=10,
    params:
        analyses=ANALYSES,
        overlays=STUDY.overlays,
        code=code_hash("fogline.drawing"),
    script:
        "../scripts/compare_analyses.py"


rule compare_with_previous:
    input:
        tables=expand(
            "results/{analysis}/tables/{table}.ecsv", analysis=ANALYSES, table=TABLES
        ),
        previous=previous_tables(),
    output:
        table="results/comparison/tables/changes.ecsv",
        pdf="results/comparison/figures/changes.pdf",
        png=report(
            "results/comparison/figures/changes.png",
            caption="../report/changes.rst",
            category="Comparison of analyses",
            labels={"figure": "changes"},
        ),
    log:
        "logs/compare_with_previous.log",
    resources:
        mem_mb=1000,
        runtime=10,
    params:
        analyses=ANALYSES,
        folder=STUDY.compare_with,
        code=code_hash("fogline.drawing"),
    script:
        "../scripts/compare_with_previous.py"
