rule render_tables:
    input:
        expand("results/{{analysis}}/tables/{table}.ecsv", table=TABLES),
    output:
        [
            report(
                f"results/{{analysis}}/tables/{table}.html",
                caption="../report/table.rst",
                category="{analysis}",
                subcategory="Tables",
                labels={"table": table.replace("_", " ")},
            )
            for table in TABLES
        ],
    log:
        "logs/render_tables/{analysis}.log",
    resources:
        mem_mb=600,
        runtime=10,
    params:
        code=code_hash("fogline.html"),
    script:
        "../scripts/render_tables.py"


rule summarize:
    input:
        convergence="results/{analysis}/convergence.json",
        tables=expand("results/{{analysis}}/tables/{table}.ecsv", table=TABLES),
        figures=expand("results/{{analysis}}/figures/{figure}.png", figure=FIGURES),
    output:
        page=report(
            "results/{analysis}/summary.html",
            caption="../report/summary.rst",
            category="{analysis}",
            subcategory="Summary",
            labels={"page": "summary"},
        ),
        text="results/{analysis}/summary.md",
    log:
        "logs/summarize/{analysis}.log",
    resources:
        mem_mb=600,
        runtime=10,
    params:
        # No inputs: what stands there from hold-outs is told, but never made for this page.
        hold_outs=lambda wildcards: hold_outs_hash(wildcards.analysis),
        code=code_hash("fogline.summary", "fogline.summary_page"),
    script:
        "../scripts/summarize.py"
