"""What runs again, and what does not: data, config, code, and a run that was killed."""

import re
import shutil
from pathlib import Path

import h5py
import numpy as np
import pytest
from conftest import CONFIG, PROJECT, StudyFolder, make_study


def planned(study: StudyFolder, **env: str) -> dict[str, int]:
    """Return the number of jobs of every rule that a dry run plans."""
    done = study.run("--dry-run", **env)
    assert done.returncode == 0, done.stdout
    table = re.findall(r"^(\w+) +(\d+)$", done.stdout, flags=re.MULTILINE)
    return {rule: int(count) for rule, count in table if rule not in ("total", "job", "all")}


def test_nothing_to_do_after_a_complete_run(finished: StudyFolder) -> None:
    assert planned(finished) == {}


def test_swapped_file_reruns_only_what_depends_on_it(finished: StudyFolder, tmp_path: Path) -> None:
    study = finished.copy(tmp_path / "study")
    path = study.path / "data" / "mean_free_path.ecsv"
    path.write_text(path.read_text().replace("invented", "freshly invented"))
    jobs = planned(study)
    # One analysis has the file; the other is left alone, but for the comparison of both.
    assert jobs["build_response"] == 1
    assert jobs["sample_ensemble"] == 2
    assert jobs["draw_figures"] == 1
    assert jobs["compare_analyses"] == 1


def test_sampler_setting_leaves_the_response_alone(finished: StudyFolder, tmp_path: Path) -> None:
    study = finished.copy(tmp_path / "study")
    config = study.path / "config" / "config.yaml"
    config.write_text(CONFIG.replace("target_ess: 800", "target_ess: 900"))
    jobs = planned(study)
    assert "build_response" not in jobs
    assert jobs["sample_ensemble"] == 4


def test_derived_grid_leaves_the_chains_alone(finished: StudyFolder, tmp_path: Path) -> None:
    study = finished.copy(tmp_path / "study")
    config = study.path / "config" / "config.yaml"
    config.write_text(CONFIG.replace("step: 0.5", "step: 0.25"))
    jobs = planned(study)
    assert jobs["derive_tables"] == 2
    assert not {"build_response", "sample_ensemble", "combine_ensembles"} & set(jobs)


def test_comment_in_the_config_reruns_nothing(finished: StudyFolder, tmp_path: Path) -> None:
    study = finished.copy(tmp_path / "study")
    (study.path / "config" / "config.yaml").write_text("# a remark\n" + CONFIG)
    assert planned(study) == {}


def test_new_hold_outs_make_the_page_again_and_nothing_else(
    finished: StudyFolder, tmp_path: Path
) -> None:
    study = finished.copy(tmp_path / "study")
    (study.path / "results/all_data/tables/tension.ecsv").write_text("of hold-outs")
    assert planned(study) == {"summarize": 1}


@pytest.mark.parametrize(
    ("module", "first"),
    [("figures/pulls.py", "draw_figures"), ("likelihood/rows.py", "build_response")],
)
def test_changed_code_reruns_what_uses_it(
    finished: StudyFolder, tmp_path: Path, module: str, first: str
) -> None:
    study = finished.copy(tmp_path / "study")
    source = tmp_path / "src"
    shutil.copytree(PROJECT / "src", source)
    with (source / "fogline" / module).open("a") as file:
        file.write("\n# changed\n")
    jobs = planned(study, PYTHONPATH=str(source))
    assert jobs[first] == 2
    assert ("sample_ensemble" in jobs) == (first == "build_response")


def test_killed_run_resumes_bit_identical(tmp_path: Path) -> None:
    """SIGKILL in mid-sampling; the finished run equals one that was never disturbed."""
    config = CONFIG.replace("target_ess: 800", "target_ess: 40000").replace(
        "walkers: 64", "walkers: 128"
    )
    target = "results/all_data/ensembles/0.h5"
    whole = make_study(tmp_path / "whole", config)
    assert whole.run(target).returncode == 0
    killed = make_study(tmp_path / "killed", config)
    killed.run_and_kill(killed.path / "results/all_data/checkpoints" / "0-*.h5", target)
    assert not (killed.path / target).exists()
    assert killed.run("--unlock").returncode == 0
    done = killed.run(target)
    assert done.returncode == 0, done.stdout
    assert "resum" in (killed.path / "logs/sample_ensemble/all_data_0.log").read_text()
    with h5py.File(whole.path / target) as left, h5py.File(killed.path / target) as right:
        for name in ("chain", "ln_prob"):
            np.testing.assert_array_equal(left[name][()], right[name][()])
    assert not list((killed.path / "results/all_data/checkpoints").iterdir())
