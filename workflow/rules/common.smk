"""The study, checked before any rule is looked at, and what rules need to know of it."""

import os
import sys

from fogline.plan import (
    CHECKS,
    DERIVED,
    EXPORTS,
    FIGURES,
    TENSION_FIGURES,
    TENSION_TABLES,
    closing_words,
    hold_out_groups,
    hold_outs_hash,
    kinds_of,
    read_study,
)
from fogline.faults import InputError
from fogline.linked_files import linked_files
from fogline.provenance import code_hash, settings_hash

# Products of one walker batch are too small to share among threads, and ensembles run side by side.
for variable in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(variable, "1")

try:
    STUDY = read_study(config, workflow.configfiles)
except InputError as error:
    print(error, file=sys.stderr)
    sys.exit(2)

ANALYSES = [name for name, made in STUDY.analyses.items() if not made.on_request]
TABLES = ["parameters", *DERIVED, *CHECKS]
FORECASTS = [
    f"results/{analysis}/figures/forecast.pdf"
    for analysis in ANALYSES
    if STUDY.analyses[analysis].forecasts
]
COMPARISON = ["results/comparison/figures/shifts.pdf"] if len(ANALYSES) > 1 else []
if STUDY.compare_with:
    COMPARISON.append("results/comparison/figures/changes.pdf")


wildcard_constraints:
    analysis=r"[A-Za-z0-9_-]+",
    ensemble=r"\d+",
    group=r"[A-Za-z0-9_.-]+",
    kind=r"[a-z_]+",
    mode="prior|posterior",
    batch=r"\d+",
    run=r"\d+",
    family=r"[A-Za-z0-9_-]+",


def previous_tables():
    """The derived tables of the results folder that the study is compared with."""
    folder = STUDY.compare_with
    paths = [
        os.path.join(folder, analysis, "tables", f"{table}.ecsv")
        for analysis in (ANALYSES if folder else [])
        for table in DERIVED
    ]
    return [path for path in paths if os.path.isfile(path)]


def analysis_of(wildcards):
    """The settings of a job's analysis."""
    return STUDY.analyses[wildcards.analysis]


def ensembles_of(wildcards):
    """The files of all ensembles of a job's analysis."""
    count = analysis_of(wildcards).sampler.ensembles
    return expand("results/{{analysis}}/ensembles/{i}.h5", i=range(count))


def calibration_batches(wildcards):
    """The files of all batches of an analysis and mode."""
    settings = analysis_of(wildcards).checks.calibration
    count = -(-settings.replicates // settings.batch)
    return expand(
        "results/{{analysis}}/calibration/{{mode}}/{batch}.json", batch=range(count)
    )


def other_samplers(wildcards):
    """The files of the samplers that an analysis is compared with."""
    runs = 2 if analysis_of(wildcards).checks.nested else 0
    return [
        "results/{analysis}/agreement/tempered.h5",
        *(f"results/{{analysis}}/agreement/nested_{run}.h5" for run in range(runs)),
    ]


def of_members(pattern):
    """A function that gives one file for every member of a job's family."""
    return lambda wildcards: expand(pattern, member=STUDY.families[wildcards.family])
