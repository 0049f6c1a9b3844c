"""A typo in the config or a bad constraint file: words, place, status, and nothing written."""

from conftest import CONFIG, StudyFolder


def test_misspelt_key_names_place_and_nearest(fresh: StudyFolder) -> None:
    config = CONFIG.replace("  pivots: [12.0", "  pivotes: [12.0")
    (fresh.path / "config" / "config.yaml").write_text(config)
    done = fresh.run()
    assert done.returncode == 2
    assert "config/config.yaml:4:" in done.stdout
    assert "did you mean 'pivots'?" in done.stdout
    assert "Traceback" not in done.stdout
    assert not (fresh.path / "results").exists()


def test_glob_without_files_is_a_fault(fresh: StudyFolder) -> None:
    config = CONFIG.replace("data/*.ecsv", "datum/*.ecsv")
    (fresh.path / "config" / "config.yaml").write_text(config)
    done = fresh.run("--dry-run")
    assert done.returncode == 2
    assert "datum/*.ecsv" in done.stdout


def test_bad_constraint_file_names_its_lines(fresh: StudyFolder) -> None:
    path = fresh.path / "data" / "lya_opacity.ecsv"
    text = path.read_text().replace("form: tau", "form: tao")
    path.write_text(text)
    line = next(i for i, row in enumerate(text.splitlines(), 1) if "form: tao" in row)
    done = fresh.run("results/all_data/response.h5")
    assert done.returncode != 0
    assert f"data/lya_opacity.ecsv:{line}:" in done.stdout
    assert "Traceback" not in done.stdout
    assert not (fresh.path / "results" / "all_data" / "response.h5").exists()


def test_file_beyond_the_pivots_names_both_ranges(fresh: StudyFolder) -> None:
    config = CONFIG.replace("20.3, 22.0]", "20.3, 21.0]")
    (fresh.path / "config" / "config.yaml").write_text(config)
    done = fresh.run("results/all_data/response.h5")
    assert done.returncode != 0
    assert "data/dla_columns.ecsv" in done.stdout
    assert "21" in done.stdout
    assert "22" in done.stdout


def test_other_config_replaces_the_default(fresh: StudyFolder) -> None:
    other = CONFIG.replace("all_data", "alone").replace("without_free_path", "rest")
    (fresh.path / "other.yaml").write_text(other)
    done = fresh.run("--dry-run", "--configfile", "other.yaml")
    assert done.returncode == 0, done.stdout
    assert "results/alone/response.h5" in done.stdout
    assert "all_data" not in done.stdout


def test_step_limit_is_said_and_everything_still_written(fresh: StudyFolder) -> None:
    config = CONFIG.replace("target_ess: 800", "target_ess: 1000000\n  max_steps: 200")
    (fresh.path / "config" / "config.yaml").write_text(config)
    # One figure of one analysis: that takes everything before it.
    figure = "results/all_data/figures/pulls.pdf"
    done = fresh.run(figure)
    assert done.returncode == 0, done.stdout
    assert "all_data: NOT CONVERGED" in done.stdout
    assert "step limit" in done.stdout
    assert (fresh.path / figure).exists()
