"""A miniature study in a folder of its own: the real workflow, few parameters, short chains."""

import os
import shutil
import signal
import subprocess
import sys
import time
from dataclasses import dataclass
from pathlib import Path

import pytest

PATIENCE = 1200
"""Seconds that a run may take: far more than it needs on a busy machine."""

PROJECT = Path(__file__).parents[2]
DATASETS = ("lya_opacity", "forest_columns", "lls_incidence", "mean_free_path", "dla_columns")

CONFIG = """\
cosmology: {H0: 70.0, Om0: 0.3}
model:
  reference_redshift: 2.5
  pivots: [12.0, 14.5, 17.5, 20.3, 22.0]
  evolution: {pivots: [16.0], prior: {dist: norm, loc: 1.5, scale: 1.5}}
  doppler: {dist: fixed, b: 26.0}
sampler:
  walkers: 64
  ensembles: 2
  seed: 11
  target_ess: 800
  thin: 5
  warm_up: [150, 100, 100]
  components: [2, 4, 4]
analyses:
  all_data:
    datasets: [data/*.ecsv]
  without_free_path:
    base: all_data
    exclude: [data/mean_free_path.ecsv]
derive:
  redshifts: {start: 2.0, stop: 4.0, step: 0.5}
  column_redshifts: [2.5, 3.5]
  draws: 200
"""


@dataclass
class StudyFolder:
    """A folder with the workflow, a config and constraint files."""

    path: Path

    def command(self, *arguments: str) -> list[str]:
        """Return a Snakemake command line."""
        return [sys.executable, "-m", "snakemake", "--cores", "2", *arguments]

    def run(self, *arguments: str, **env: str) -> subprocess.CompletedProcess[str]:
        """Run Snakemake to its end; stderr is joined to stdout."""
        return subprocess.run(
            self.command(*arguments),
            cwd=self.path,
            env=os.environ | env,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
            timeout=PATIENCE,
            check=False,
        )

    def run_and_kill(self, when: Path, *arguments: str, patience: float = 120.0) -> None:
        """Start Snakemake and SIGKILL it with all its jobs once a file appears."""
        process = subprocess.Popen(
            self.command(*arguments),
            cwd=self.path,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
            start_new_session=True,
        )
        deadline = time.monotonic() + patience
        while not list(when.parent.glob(when.name)) and time.monotonic() < deadline:
            assert process.poll() is None, "the run ended before it could be killed"
            time.sleep(0.02)
        os.killpg(process.pid, signal.SIGKILL)
        process.wait()

    def copy(self, path: Path) -> "StudyFolder":
        """Return a copy with all results and Snakemake's records."""
        shutil.copytree(self.path, path)
        return StudyFolder(path)


def make_study(path: Path, config: str = CONFIG) -> StudyFolder:
    """Lay out a study folder."""
    for name in ("workflow", "profiles"):
        shutil.copytree(PROJECT / name, path / name)
    shutil.copy(PROJECT / "Snakefile", path)
    (path / "config").mkdir()
    (path / "config" / "config.yaml").write_text(config)
    (path / "data").mkdir()
    for name in DATASETS:
        shutil.copy(PROJECT / "config" / "demo" / f"{name}.ecsv", path / "data")
    return StudyFolder(path)


@pytest.fixture
def fresh(tmp_path: Path) -> StudyFolder:
    """A study that never ran."""
    return make_study(tmp_path / "study")


@pytest.fixture(scope="session")
def finished(tmp_path_factory: pytest.TempPathFactory) -> StudyFolder:
    """The study after a complete run; tests must not change it (use `copy`)."""
    study = make_study(tmp_path_factory.mktemp("finished") / "study")
    done = study.run()
    assert done.returncode == 0, done.stdout
    return study
