rule draw_figures:
    input:
        response="results/{analysis}/response.h5",
        ensembles=ensembles_of,
        posterior="results/{analysis}/posterior.nc",
        convergence="results/{analysis}/convergence.json",
        tables=expand("results/{{analysis}}/tables/{table}.ecsv", table=TABLES),
    output:
        pdf=expand("results/{{analysis}}/figures/{figure}.pdf", figure=FIGURES),
        png=[
            report(
                f"results/{{analysis}}/figures/{figure}.png",
                caption=f"../report/{figure}.rst",
                category="{analysis}",
                subcategory="Figures",
                labels={"figure": figure.replace("_", " ")},
            )
            for figure in FIGURES
        ],
    log:
        "logs/draw_figures/{analysis}.log",
    resources:
        mem_mb=1500,
        runtime=20,
    params:
        derive=lambda wildcards: settings_hash(analysis_of(wildcards).derive),
        draws=lambda wildcards: analysis_of(wildcards).derive.draws,
        false_alarm=lambda wildcards: analysis_of(wildcards).checks.false_alarm,
        reference_redshift=lambda wildcards: analysis_of(
            wildcards
        ).model.reference_redshift,
        code=code_hash("fogline.figures"),
    script:
        "../scripts/draw_figures.py"
