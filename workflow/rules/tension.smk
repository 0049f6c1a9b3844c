"""Hold-outs and kinds fitted alone: as many independent jobs, made on request."""


rule hold_out:
    input:
        response="results/{analysis}/response.h5",
        posterior="results/{analysis}/posterior.nc",
        sides=lambda wildcards: analysis_of(wildcards).derive.side_files,
    output:
        found="results/{analysis}/hold_outs/{group}.json",
    log:
        "logs/hold_out/{analysis}_{group}.log",
    resources:
        mem_mb=1500,
        runtime=30,
    params:
        members=lambda wildcards: hold_out_groups(analysis_of(wildcards))[
            wildcards.group
        ],
        settings=lambda wildcards: settings_hash(
            analysis_of(wildcards).sampler, analysis_of(wildcards).derive
        ),
        code=code_hash("fogline.trust.hold_outs"),
    script:
        "../scripts/hold_out.py"


rule fit_alone:
    input:
        response="results/{analysis}/response.h5",
    output:
        found="results/{analysis}/alone/{kind}.json",
    log:
        "logs/fit_alone/{analysis}_{kind}.log",
    resources:
        mem_mb=1500,
        runtime=30,
    params:
        kinds=lambda wildcards: kinds_of(analysis_of(wildcards)),
        sampler=lambda wildcards: settings_hash(analysis_of(wildcards).sampler),
        code=code_hash("fogline.trust.hold_outs"),
    script:
        "../scripts/fit_alone.py"


rule gather_tension:
    input:
        response="results/{analysis}/response.h5",
        hold_outs=lambda wildcards: expand(
            "results/{{analysis}}/hold_outs/{group}.json",
            group=hold_out_groups(analysis_of(wildcards)),
        ),
        alone=lambda wildcards: expand(
            "results/{{analysis}}/alone/{kind}.json",
            kind=kinds_of(analysis_of(wildcards)),
        ),
    output:
        tables=expand("results/{{analysis}}/tables/{table}.ecsv", table=TENSION_TABLES),
        pdf=expand("results/{{analysis}}/figures/{figure}.pdf", figure=TENSION_FIGURES),
        png=[
            report(
                f"results/{{analysis}}/figures/{figure}.png",
                caption=f"../report/{figure}.rst",
                category="{analysis}",
                subcategory="Tension",
                labels={"figure": figure.replace("_", " ")},
            )
            for figure in TENSION_FIGURES
        ],
    log:
        "logs/gather_tension/{analysis}.log",
    resources:
        mem_mb=1000,
        runtime=10,
    params:
        false_alarm=lambda wildcards: analysis_of(wildcards).checks.false_alarm,
        code=code_hash("fogline.trust.tension"),
    script:
        "../scripts/gather_tension.py"


# On request: snakemake --cores all hold_outs
rule hold_outs:
    input:
        expand("results/{analysis}/figures/tension.pdf", analysis=ANALYSES),
    localrule: True
