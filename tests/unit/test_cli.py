"""The command line: what each command prints and writes, and how it says what is wrong.

Common practice: nothing here comes from a publication.
"""

from __future__ import annotations

import subprocess
import sys
from importlib import metadata

import numpy as np
import pytest
from astropy.table import Table

from fogline.cli import main
from fogline.config import load_config
from fogline.faults import InputError
from fogline.points import read_point
from fogline.quantities import FILE_SPECS
from fogline.side_tables import SIDE_TABLES, read_side_table, side_template
from fogline.templates import template

CONFIG = """\
cosmology: {H0: 70.0, Om0: 0.3}
model:
  reference_redshift: 2.5
  pivots: [12.0, 14.0, 17.5, 20.3, 22.5]
  evolution:
    pivots: [14.0, 20.0]
    prior: {dist: norm, loc: 1.5, scale: 1.5}
analyses:
  joint:
    datasets: [data/*.ecsv]
  narrow:
    datasets: [data/column_distribution.ecsv]
    model: {pivots: [20.0, 20.3, 22.5], evolution: {pivots: [20.3]}}
derive:
  redshifts: [2.5, 3.0]
"""

POINT = """\
log_f: [-11.0, -13.7, -18.6, -21.7, -26.0]
evolution: [2.0, 1.5]
"""


@pytest.fixture
def study(tmp_path, monkeypatch):
    for folder in ("data", "config"):
        (tmp_path / folder).mkdir()
    for quantity in FILE_SPECS:
        text = template(quantity).replace("survey_path: path", "survey_path: ../path")
        (tmp_path / "data" / f"{quantity}.ecsv").write_text(text, encoding="utf-8")
    (tmp_path / "path.ecsv").write_text(side_template("sightlines"), encoding="utf-8")
    (tmp_path / "config" / "config.yaml").write_text(CONFIG, encoding="utf-8")
    (tmp_path / "point.yaml").write_text(POINT, encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def fails(capsys, *arguments):
    """Run a command that must fail on the user's input; return its lines on stderr."""
    assert main(arguments) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert "Traceback" not in err
    return err.splitlines()


def at_point(command, analysis="joint", point="point.yaml", config="config/config.yaml"):
    return [command, "--config", config, "--analysis", analysis, "--point", point]


# path


def test_path_counts_the_sightlines_that_cover_a_redshift(study, capsys):
    rows = "# %ECSV 1.0\n# ---\n# datatype:\n# - {name: z_start, datatype: float64}\n"
    rows += "# - {name: z_end, datatype: float64}\n# meta: {kind: sightlines, source: invented}\n"
    rows += "# schema: astropy-2.0\nz_start z_end\n2.0 3.0\n2.5 3.5\n2.5 2.75\n"
    (study / "lines.ecsv").write_text(rows, encoding="utf-8")
    assert main(["path", "lines.ecsv", "--output", "g.ecsv"]) == 0
    g = read_side_table(study / "g.ecsv", "sensitivity")
    covered = np.interp([2.2, 2.6, 2.8, 3.2], g["z"], g["g"])
    np.testing.assert_allclose(covered, [1.0, 3.0, 2.0, 1.0])
    assert np.trapezoid(g["g"], g["z"]) == pytest.approx(1.0 + 1.0 + 0.25, rel=1e-6)
    capsys.readouterr()
    assert main(["path", "lines.ecsv"]) == 0
    assert Table.read(capsys.readouterr().out, format="ascii.ecsv").meta["kind"] == "sensitivity"


def test_path_refuses_what_is_no_list_of_sightlines(study, capsys):
    (study / "lines.ecsv").write_text(side_template("sensitivity"), encoding="utf-8")
    (line,) = fails(capsys, "path", "lines.ecsv", "--output", "g.ecsv")
    assert line.startswith("lines.ecsv:")
    assert "sightlines" in line
    assert not (study / "g.ecsv").exists()


# check


def test_check_prints_one_row_per_data_set(study, capsys):
    assert main(["check"]) == 0
    out, err = capsys.readouterr()
    lines = out.splitlines()
    assert err == ""
    assert [line.split()[0] for line in lines[1:-1]] == sorted(FILE_SPECS)
    row = next(line for line in lines if line.startswith("lls_incidence"))
    assert row.split() == [
        *("lls_incidence", "lls_incidence", "2", "2.4", "to", "3", "17.5", "to", "the", "top"),
        *("Table", "1", "of", "..."),
    ]
    assert lines[-1] == "config/config.yaml: analyses joint, narrow"


def test_check_of_files_needs_no_config(study, capsys):
    (study / "config" / "config.yaml").unlink()
    assert main(["check", "data/hi_density.ecsv", "./data/hi_density.ecsv"]) == 0
    out, _ = capsys.readouterr()
    assert len(out.splitlines()) == 2


def test_check_tells_everything_about_config_and_files(study, capsys):
    (study / "config" / "config.yaml").write_text(CONFIG.replace("H0: 70.0", "H0: 7"))
    (study / "bad.ecsv").write_text(template("hi_density").replace("2.4 ", "-2.4 "))
    lines = fails(capsys, "check", "--config", "config/config.yaml", "bad.ecsv", "none.ecsv")
    assert len(lines) == 3
    assert lines[0].startswith("bad.ecsv:")
    assert "z is -2.4" in lines[0]
    assert lines[1].startswith("config/config.yaml:1: cosmology.H0 is 7")
    assert lines[2] == "none.ecsv:1: no such file"


def test_check_compares_columns_with_pivots(study, capsys):
    config = study / "config" / "config.yaml"
    config.write_text(CONFIG.replace("[12.0, 14.0,", "[13.0, 14.0,"))
    lines = fails(capsys, "check")
    files = ["data/lya_opacity.ecsv:", "data/lyman_series_opacity.ecsv:"]
    assert all(line.startswith(file) for line, file in zip(lines, files, strict=True))
    assert all("12 to 17.2" in line and "13 to 22.5" in line for line in lines)


def test_check_of_a_list_needs_columns_that_scatter_into_it(study, capsys):
    config = study / "config" / "config.yaml"
    narrow = CONFIG.replace("[data/column_distribution.ecsv]", "[data/absorber_list.ecsv]")
    config.write_text(narrow.replace("pivots: [20.0, 20.3, 22.5]", "pivots: [20.3, 21.0, 22.5]"))
    (line,) = fails(capsys, "check")
    assert line.startswith("data/absorber_list.ecsv:")
    assert "needs columns log N_HI = 20.06 to" in line


def test_check_of_a_further_file_against_the_config(study, capsys):
    path = study / "further.ecsv"
    path.write_text(template("hi_density").replace("log_nhi_min: 20.3", "log_nhi_min: 21.0"))
    assert main(["check", "--config", "config/config.yaml", "further.ecsv"]) == 0
    path.write_text(template("hi_density").replace("log_nhi_min: 20.3", "log_nhi_min: 11.0"))
    capsys.readouterr()
    (line,) = fails(capsys, "check", "--config", "config/config.yaml", "further.ecsv")
    assert "11 to the top" in line


def test_check_finds_equal_names_and_wrong_distributions(study, capsys):
    (study / "more").mkdir()
    (study / "more" / "hi_density.ecsv").write_text(template("hi_density"), encoding="utf-8")
    text = CONFIG.replace("[data/*.ecsv]", "[data/*.ecsv, more/*.ecsv]")
    (study / "config" / "config.yaml").write_text(text.replace("dist: norm", "dist: nrm"))
    first, second = fails(capsys, "check")
    assert first.startswith("config/config.yaml:7: ")
    assert "norm" in first
    assert second.startswith("more/hi_density.ecsv:1: has the same name 'hi_density'")


def test_check_without_config(study, capsys):
    (study / "config" / "config.yaml").unlink()
    assert fails(capsys, "check") == ["config/config.yaml:1: no such file"]


# template


@pytest.mark.parametrize("quantity", FILE_SPECS)
def test_template_passes_check(study, capsys, quantity):
    assert main(["template", quantity]) == 0
    (study / "printed.ecsv").write_text(capsys.readouterr().out, encoding="utf-8")
    assert main(["check", "printed.ecsv"]) == 0


def test_template_names_the_nearest_quantity(capsys):
    assert fails(capsys, "template", "lya_opacty") == [
        "fogline: unknown quantity 'lya_opacty'; did you mean 'lya_opacity'?"
    ]


def test_template_without_quantity_lists_them(capsys):
    assert main(["template"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert [line.split()[0] for line in lines] == [*FILE_SPECS, *SIDE_TABLES]


@pytest.mark.parametrize("kind", SIDE_TABLES)
def test_template_of_a_side_table_passes_check(study, capsys, kind):
    assert main(["template", kind]) == 0
    (study / "side.ecsv").write_text(capsys.readouterr().out, encoding="utf-8")
    assert main(["check", "side.ecsv"]) == 0
    assert f"side.ecsv: good {kind} table" in capsys.readouterr().out


# predict and derive


def test_predict_writes_every_row(study, capsys):
    assert main([*at_point("predict"), "--output", "out/predicted.ecsv"]) == 0
    table = Table.read("out/predicted.ecsv", format="ascii.ecsv")
    assert {"dataset", "row", "quantity", "z", "observed", "predicted"} <= set(table.colnames)
    assert len(table) == 2 * len(FILE_SPECS)
    assert set(table["dataset"]) == set(FILE_SPECS)
    assert list(table["row"][:2]) == [0, 1]
    assert np.isfinite(table["predicted"]).all()
    assert np.isfinite(table.meta["ln_likelihood"])
    assert [path.name for path in (study / "out").iterdir()] == ["predicted.ecsv"]
    assert main(at_point("predict")) == 0
    printed = Table.read(capsys.readouterr().out, format="ascii.ecsv")
    np.testing.assert_allclose(printed["predicted"], table["predicted"], rtol=1e-6)


def test_derive_writes_tables(study, capsys):
    assert main([*at_point("derive"), "--output", "tables"]) == 0
    names = {path.stem for path in (study / "tables").iterdir()}
    assert {"column_distribution", "incidence", "hi_density", "mean_free_path"} <= names
    # Where the local-source relation fails is printed, not only written.
    assert "ionizing_background: given:" in capsys.readouterr().out


@pytest.mark.parametrize("command", ["predict", "derive"])
def test_nothing_is_written_where_the_input_is_at_fault(study, capsys, command):
    (study / "point.yaml").write_text(POINT.replace("[2.0, 1.5]", "[2.0, .nan, 1e3]"))
    lines = fails(capsys, *at_point(command), "--output", "out")
    assert lines == [
        "point.yaml:2: evolution lists 3 numbers, must be 2: one for each of 14, 20",
        "point.yaml:2: evolution[1] is nan, must be a finite number",
        "point.yaml:2: evolution[2] is '1e3', must be a finite number; "
        "'1e3' is text to YAML, write 1000.0 without quotes",
    ]
    assert not (study / "out").exists()


def test_unknown_analysis_names_the_nearest(study, capsys):
    (line,) = fails(capsys, *at_point("predict", "jont"))
    assert line == "config/config.yaml:8: has no analysis 'jont'; did you mean 'joint'?"


def test_predict_checks_the_data(study, capsys):
    text = template("hi_density").replace("log_nhi_min: 20.3", "log_nhi_min: 11.0")
    (study / "data" / "hi_density.ecsv").write_text(text, encoding="utf-8")
    (line,) = fails(capsys, *at_point("predict"))
    assert "beyond the pivots" in line


def test_output_that_cannot_be_written(study, capsys):
    (study / "file").touch()
    assert main([*at_point("predict"), "--output", "file/out.ecsv"]) == 1
    assert capsys.readouterr().err.startswith("fogline: ")


# points


@pytest.fixture
def model(study):
    return load_config("config/config.yaml").analyses["joint"].model


def test_point_is_read(model):
    point = read_point("point.yaml", model)
    np.testing.assert_array_equal(point.theta, [-11.0, -13.7, -18.6, -21.7, -26.0, 2.0, 1.5])


@pytest.mark.parametrize(
    ("text", "faults"),
    [
        ("", [(1, "lacks 'log_f'"), (1, "lacks 'evolution'")]),
        ("- 1\n", [(1, "lacks 'log_f'"), (1, "lacks 'evolution'")]),
        (POINT.replace("log_f", "log_F"), [(1, "unknown key 'log_F'"), (1, "lacks 'log_f'")]),
        (POINT.replace("-26.0", "low"), [(1, "log_f[4] is 'low'")]),
        (POINT.replace("-26.0", "true"), [(1, "log_f[4] is True")]),
        (POINT.replace(", -26.0", ""), [(1, "lists 4 numbers, must be 5")]),
        (POINT.replace("[2.0, 1.5]", "2.0"), [(2, "evolution is 2.0, must be a list")]),
        (POINT.replace("[2.0, 1.5]", "\n- 2.0\n- [1.5]"), [(4, "evolution[1] is [1.5]")]),
        (POINT + "log_f: []\n", [(3, "'log_f' stands twice")]),
        (POINT + "z: 3\n", [(3, "unknown key 'z'; allowed: evolution, log_f")]),
        (POINT + "]", [(3, "not valid YAML")]),
    ],
)
def test_point_at_fault(study, model, text, faults):
    (study / "point.yaml").write_text(text, encoding="utf-8")
    with pytest.raises(InputError, match=r"point\.yaml:") as caught:
        read_point("point.yaml", model)
    found = sorted((fault.line, fault.what) for fault in caught.value.faults)
    assert len(found) == len(faults)
    for line, words in faults:
        assert any(line == at and words in what for at, what in found), found


# the process


def test_version_and_help(capsys):
    for option, text in (("--version", metadata.version("fogline")), ("--help", "template")):
        with pytest.raises(SystemExit, match="0"):
            main([option])
        assert text in capsys.readouterr().out


def test_command_line_itself_at_fault(capsys):
    with pytest.raises(SystemExit, match="2"):
        main(["predict"])
    assert "--analysis" in capsys.readouterr().err


def test_reader_that_goes_away_leaves_no_traceback(study):
    command = f"{sys.executable} -m fogline.cli template hi_density | true"
    done = subprocess.run(command, shell=True, capture_output=True, text=True, check=False)
    assert done.stderr == ""
