"""Families of models of the same data, weighed and combined; made on request."""


rule combine_family:
    input:
        responses=of_members("results/{member}/response.h5"),
        posteriors=of_members("results/{member}/posterior.nc"),
        convergence=of_members("results/{member}/convergence.json"),
    output:
        tables=expand(
            "results/families/{{family}}/tables/{table}.ecsv",
            table=["weights", "combined"],
        ),
        pdf="results/families/{family}/figures/family.pdf",
        png=report(
            "results/families/{family}/figures/family.png",
            caption="../report/family.rst",
            category="Families",
            labels={"figure": "{family}"},
        ),
    log:
        "logs/combine_family/{family}.log",
    resources:
        mem_mb=2000,
        runtime=15,
    params:
        members=lambda wildcards: list(STUDY.families[wildcards.family]),
        code=code_hash("fogline.trust.families"),
    script:
        "../scripts/combine_family.py"


# On request: snakemake --cores all families
rule families:
    input:
        expand("results/families/{family}/figures/family.pdf", family=STUDY.families),
    localrule: True
