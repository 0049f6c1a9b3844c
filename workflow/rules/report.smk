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
