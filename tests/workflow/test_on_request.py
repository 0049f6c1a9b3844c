"""What a user asks for beyond the default run: hold-outs, calibration, other samplers, families."""

import shutil

import numpy as np
import pytest
from astropy.table import Table
from conftest import StudyFolder

MORE = """\
  coarse:
    base: all_data
    on_request: true
    model: {pivots: [12.0, 15.0, 20.3, 22.0]}
families:
  pivots: [all_data, coarse]
compare_with: before
checks:
  calibration: {replicates: 20, batch: 10, draws: 19, modes: [posterior]}
derive:
"""

FILES = (
    "results/all_data/figures/tension.pdf",
    "results/all_data/figures/calibration_posterior.pdf",
    "results/all_data/figures/agreement.pdf",
    "results/families/pivots/figures/family.pdf",
    "results/comparison/figures/changes.pdf",
)


@pytest.fixture(scope="module")
def asked(finished: StudyFolder, tmp_path_factory: pytest.TempPathFactory) -> StudyFolder:
    """The finished study, and everything that is made on request."""
    study = finished.copy(tmp_path_factory.mktemp("asked") / "study")
    shutil.copytree(study.path / "results", study.path / "before")
    config = study.path / "config" / "config.yaml"
    config.write_text(config.read_text().replace("derive:\n", MORE))
    done = study.run("--", *FILES)
    assert done.returncode == 0, done.stdout
    return study


def table(study: StudyFolder, name: str) -> Table:
    return Table.read(study.path / "results" / name)


def test_every_data_set_is_left_out_once(asked: StudyFolder) -> None:
    found = table(asked, "all_data/tables/tension.ecsv")
    assert sorted(found["group"]) == [
        "dla_columns",
        "forest_columns",
        "lls_incidence",
        "lya_opacity",
        "mean_free_path",
    ]
    assert set(found["how"]) <= {"reweighted", "refitted"}
    assert ((np.asarray(found["pareto_k"]) < 0.7) == (found["how"] == "reweighted")).all()
    pairs = table(asked, "all_data/tables/pairwise.ecsv")
    assert len(pairs) == 4 * 3  # kinds: two data sets are of one
    moved = table(asked, "all_data/tables/hold_out_shifts.ecsv")
    assert set(moved["group"]) == set(found["group"])


def test_calibration_has_every_replicate(asked: StudyFolder) -> None:
    found = table(asked, "all_data/tables/calibration_posterior.ecsv")
    assert {"log_f[20.3]", "rho_hi@2.5"} <= set(found["quantity"])
    batches = list((asked.path / "results/all_data/calibration/posterior").glob("*.json"))
    assert len(batches) == 2
    assert found.meta["n_short_of_target"] <= 2


def test_another_sampler_agrees(asked: StudyFolder) -> None:
    found = table(asked, "all_data/tables/agreement.ecsv")
    assert set(found["sampler"]) == {"ensembles", "tempered"}
    assert found.meta["verdicts"][0].startswith("tempered agrees with ensembles")


def test_family_is_weighed_and_its_member_is_no_default(asked: StudyFolder) -> None:
    found = table(asked, "families/pivots/tables/weights.ecsv")
    assert list(found["analysis"]) == ["all_data", "coarse"]
    assert np.sum(found["weight_stacking"]) == pytest.approx(1.0)
    assert np.sum(found["weight_evidence"]) == pytest.approx(1.0)
    assert not (asked.path / "results/coarse/figures").exists()


def test_what_moved_since_the_previous_results_is_nothing(asked: StudyFolder) -> None:
    found = table(asked, "comparison/tables/changes.ecsv")
    finite = np.asarray(found["change_sigma"], float)
    assert np.abs(finite[np.isfinite(finite)]).max() == 0.0
    assert found.meta["changed"] == ["nothing: the same inputs and settings"]


def test_what_is_done_is_not_done_again(asked: StudyFolder) -> None:
    again = asked.run("--", *FILES)
    assert again.returncode == 0
    assert "Nothing to be done" in again.stdout
