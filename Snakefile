"""fogline: from constraint files to every table and figure, for every analysis of one config."""

from snakemake.utils import min_version

min_version("9.0")

# Another study: `snakemake --configfile other.yaml`. Merging it over the demo would run both.
if "analyses" not in config:

    configfile: "config/config.yaml"


# Everything comes with `pip install`; whoever prefers a container asks for it with --sdm apptainer.
container: "docker://python:3.13-slim"


report: "workflow/report/workflow.rst"


include: "workflow/rules/common.smk"
include: "workflow/rules/inputs.smk"
include: "workflow/rules/fit.smk"
include: "workflow/rules/derive.smk"
include: "workflow/rules/figures.smk"
include: "workflow/rules/compare.smk"
include: "workflow/rules/report.smk"
include: "workflow/rules/forecast.smk"
include: "workflow/rules/tension.smk"
include: "workflow/rules/calibration.smk"
include: "workflow/rules/agreement.smk"
include: "workflow/rules/families.smk"


rule all:
    default_target: True
    input:
        expand(
            "results/{analysis}/tables/{table}.html", analysis=ANALYSES, table=TABLES
        ),
        expand(
            "results/{analysis}/figures/{figure}.pdf",
            analysis=ANALYSES,
            figure=FIGURES,
        ),
        expand("results/{analysis}/exports/{export}", analysis=ANALYSES, export=EXPORTS),
        FORECASTS,
        expand(
            "results/{analysis}/summary.{form}", analysis=ANALYSES, form=["html", "md"]
        ),
        COMPARISON,
    localrule: True


onsuccess:
    print(closing_words(ANALYSES))
