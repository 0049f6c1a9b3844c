"""Configs: what passes becomes settings, what does not is named with its place and line.

Common practice: nothing here comes from a publication.
"""

from __future__ import annotations

import copy
import re
import subprocess
import sys
from pathlib import Path

import pytest
import yaml
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fogline.config import check_distributions, load_config, parse_config
from fogline.config_reference import update
from fogline.config_schema import schema
from fogline.faults import InputError
from fogline.yaml_lines import read_yaml

ROOT = Path(__file__).parents[2]

MINIMAL = """\
cosmology: {H0: 70.0, Om0: 0.3}
model:
  reference_redshift: 2.5
  pivots: [12.0, 15.0, 17.5, 20.0, 22.5]
  evolution:
    pivots: [14.0, 20.0]
    prior: {dist: norm, loc: 1.5, scale: 1.5}
analyses:
  joint:
    datasets: [data/*.ecsv]
"""

FULL = """\
cosmology: {H0: 70.0, Om0: 0.3, Ode0: 0.6}
model:
  reference_redshift: 2.5
  pivots: [12, 15.0, 17.5, 20.0, 22.5]
  evolution:
    pivots: [14.0, 20.0]
    prior:
      - {dist: norm, loc: 1.5, scale: 1.5}
      - {dist: uniform, loc: -1.0, scale: 5.0}
  doppler: {dist: hui_rutledge, b_sigma: 24.0}
  prior:
    anchor: {log_nhi: 17.5, dist: norm, loc: -17.0, scale: 1.0}
    slope:
      kind: walk
      first: {dist: norm, loc: 1.6, scale: 0.4}
      step: {dist: t, df: 4, scale: 0.5}
sampler:
  walkers: 64
  seed: 7
  warm_up: [50, 60]
  components: [2, 3]
derive:
  redshifts: [2.0, 2.5]
  draws: 100
analyses:
  joint:
    datasets: [data/b.ecsv, data/*.ecsv]
  low:
    base: joint
    exclude: [data/c*.ecsv]
    cosmology: {Om0: 0.27}
    model:
      doppler: {dist: fixed, b: 30.0}
      prior:
        anchor: {dist: uniform, loc: -20.0, scale: 5.0}
        slope: {kind: independent}
  lowest:
    base: low
    exclude: [data/b.ecsv]
    sampler: {walkers: 32}
    derive: {redshifts: {start: 2.0, stop: 2.3, step: 0.1}}
  again:
    base: lowest
    datasets: [data/c.ecsv]
"""


@pytest.fixture
def folder(tmp_path, monkeypatch):
    (tmp_path / "data").mkdir()
    for name in "abc":
        (tmp_path / "data" / f"{name}.ecsv").touch()
    monkeypatch.chdir(tmp_path)
    return tmp_path


def load(folder, text):
    (folder / "config.yaml").write_text(text, encoding="utf-8")
    return load_config("config.yaml")


def faults(folder, text):
    with pytest.raises(InputError, match=r"config\.yaml:") as caught:
        load(folder, text)
    assert all("\n" not in fault.what for fault in caught.value.faults)
    return [(fault.line, fault.what) for fault in caught.value.faults]


# What passes


def test_defaults_of_a_minimal_config(folder):
    analysis = load(folder, MINIMAL).analyses["joint"]
    assert analysis.name == "joint"
    assert analysis.datasets == ("data/a.ecsv", "data/b.ecsv", "data/c.ecsv")
    assert (analysis.cosmology.H0, analysis.cosmology.Ode0) == (70.0, None)
    prior = analysis.model.prior
    assert prior.anchor_log_nhi == 20.0  # the pivot nearest 20.3
    assert prior.anchor == {"dist": "norm", "loc": -21.5, "scale": 1.0}
    assert prior.slope_kind == "walk"
    assert prior.slope_step == {"dist": "norm", "loc": 0.0, "scale": 0.5}
    assert len(analysis.model.evolution.priors) == 2
    assert analysis.sampler.warm_up == (600, 300, 300, 400)
    assert analysis.derive.redshifts[:2] == (2.0, 2.1)
    assert analysis.derive.redshifts[-1] == 5.0
    assert len(analysis.derive.redshifts) == 31


def test_full_config(folder):
    analysis = load(folder, FULL).analyses["joint"]
    model = analysis.model
    assert model.pivots == (12.0, 15.0, 17.5, 20.0, 22.5)
    assert [prior["dist"] for prior in model.evolution.priors] == ["norm", "uniform"]
    assert model.doppler == {"dist": "hui_rutledge", "b_sigma": 24.0}
    assert model.prior.anchor_log_nhi == 17.5
    assert model.prior.anchor == {"dist": "norm", "loc": -17.0, "scale": 1.0}
    assert analysis.sampler.walkers == 64
    assert analysis.sampler.components == (2, 3)
    assert analysis.derive.redshifts == (2.0, 2.5)


def test_analysis_overrides_key_by_key_and_distributions_whole(folder):
    low = load(folder, FULL).analyses["low"]
    assert (low.cosmology.H0, low.cosmology.Om0, low.cosmology.Ode0) == (70.0, 0.27, 0.6)
    assert low.model.doppler == {"dist": "fixed", "b": 30.0}
    assert low.model.prior.anchor == {"dist": "uniform", "loc": -20.0, "scale": 5.0}
    assert low.model.prior.anchor_log_nhi == 17.5  # where it stands is no argument
    assert low.model.prior.slope_kind == "independent"
    assert low.model.prior.slope_step is None
    assert low.model.prior.first_slope["loc"] == 1.6


def test_base_chains_and_excludes_add_up(folder):
    analyses = load(folder, FULL).analyses
    assert list(analyses) == ["joint", "low", "lowest", "again"]
    assert analyses["joint"].datasets == ("data/a.ecsv", "data/b.ecsv", "data/c.ecsv")
    assert analyses["low"].datasets == ("data/a.ecsv", "data/b.ecsv")
    assert analyses["lowest"].datasets == ("data/a.ecsv",)
    assert analyses["lowest"].cosmology.Om0 == 0.27
    assert analyses["lowest"].sampler.walkers == 32
    assert analyses["lowest"].derive.redshifts == (2.0, 2.1, 2.2, 2.3)
    assert analyses["again"].datasets == ("data/c.ecsv",)  # a new choice drops old excludes
    assert analyses["joint"].sampler.walkers == 64


def test_mapping_needs_no_file(folder):
    config = yaml.safe_load(FULL)
    before = copy.deepcopy(config)
    study = parse_config(config)
    assert study.analyses == load(folder, FULL).analyses
    assert config == before


def test_anchors_and_merge_keys_of_yaml(folder):
    text = MINIMAL.replace("evolution:\n", "evolution: &e\n") + (
        "  other:\n    base: joint\n    model: {evolution: {<<: *e, pivots: [13.0, 20.0]}}\n"
    )
    analyses = load(folder, text).analyses
    assert analyses["other"].model.evolution.pivots == (13.0, 20.0)
    assert analyses["other"].model.evolution.priors == analyses["joint"].model.evolution.priors


def test_blocks_may_stand_under_the_analysis_alone(folder):
    config = yaml.safe_load(MINIMAL)
    config["analyses"]["joint"] |= {"cosmology": config.pop("cosmology")}
    assert parse_config(config).analyses["joint"].cosmology.H0 == 70.0


def test_file_name_that_looks_like_a_glob(folder):
    (folder / "data" / "[a].ecsv").touch()
    text = MINIMAL.replace("[data/*.ecsv]", "['data/[a].ecsv']")
    assert load(folder, text).analyses["joint"].datasets == ("data/[a].ecsv",)


def test_shipped_config_is_the_contract(monkeypatch):
    monkeypatch.chdir(ROOT)
    document = read_yaml("config/config.yaml")
    study = parse_config(document.value, "config/config.yaml", document.line)
    assert check_distributions(study) == []
    assert set(study.analyses) >= {"joint", "without_free_path", "wide_prior"}
    kept = study.analyses["without_free_path"].datasets
    assert not any("mean_free_path" in path for path in kept)
    assert set(kept) < set(study.analyses["joint"].datasets)
    wide, joint = (study.analyses[name].model for name in ("wide_prior", "joint"))
    assert wide.pivots != joint.pivots
    assert wide.prior.slope_step != joint.prior.slope_step


# What does not. Each case: what is replaced in FULL, by what, text on the line that must be named
# (None: line 1), words of the message.

BAD = {
    "unknown block": ("sampler:\n", "sampling:\n", "sampling", "'sampling'", "mean 'sampler'"),
    "unknown key": ("walkers: 64", "walker: 64", "walker:", "'sampler.walker'", "'walkers'?"),
    "unknown key below": ("Om0: 0.27", "Omega: 0.27", "0.27", "analyses.low.cosmology.Omega"),
    "key of another block": ("draws: 100", "walkers: 64", ("walkers", 2), "derive.walkers"),
    "unknown anywhere": ("kind: walk", "type: walk", "type:", "model.prior.slope.type"),
    "text number": ("loc: -1.0", "loc: 1e0", "1e0", "'1e0'", "write 1.0 without quotes"),
    "text for number": ("H0: 70.0", "H0: high", "high", "cosmology.H0 is 'high'", "<= 200"),
    "bool for number": ("draws: 100", "draws: yes", "draws", "derive.draws is True"),
    "fraction": ("walkers: 64", "walkers: 64.5", "64.5", "64.5", "whole number"),
    "date as seed": ("seed: 7", "seed: 2026-01-01", "seed", "datetime.date", "whole number"),
    "huge seed": ("seed: 7", f"seed: {10**25}", "seed", "whole number"),
    "negative": ("draws: 100", "draws: -1", "draws", "-1", ">= 10"),
    "nan": ("loc: 1.6", "loc: .nan", ".nan", "model.prior.slope.first.loc", "finite"),
    "infinite": ("reference_redshift: 2.5", "reference_redshift: .inf", ".inf", "finite"),
    "empty block": ("cosmology: {Om0: 0.27}", "cosmology:", ("cosmology", 2), "is empty"),
    "list for mapping": ("cosmology: {Om0: 0.27}", "cosmology: [1]", "[1]", "{H0: 70.0"),
    "little h": ("H0: 70.0", "H0: 0.7", "H0", "0.7", "200"),
    "no H0": ("H0: 70.0, ", "", None, "lacks 'cosmology.H0' (hubble constant"),
    "no expansion": ("Ode0: 0.6", "Ode0: 1.9", "Ode0", "no H(z)"),
    "no model": (r"(?s)model:\n.*?(?=sampler:)", "", None, "lacks 'model' for analysis 'joint'"),
    "no pivots": (r"  pivots: \[12.*\n", "", "model:", "lacks 'model.pivots'"),
    "few pivots": (r"\[12, 15.0, 17.5, 20.0, 22.5\]", "[14, 20]", "[14, 20]", "at least 3"),
    "pivots not rising": ("15.0, 17.5", "17.5, 15.0", "17.5, 15.0", "increase", "15 follows 17.5"),
    "pivot twice": ("15.0, 17.5", "17.5, 17.5", "17.5, 17.5", "17.5 follows 17.5"),
    "N for log N": ("22.5", "3.2e+22", "e+22", "3.2e+22", "<= 26"),
    "evolution outside": (r"\[14.0, 20.0\]", "[11.0, 20.0]", "[11.0", "11 lies outside", "12 to"),
    "evolution not rising": (r"\[14.0, 20.0\]", "[20.0, 14.0]", "[20.0", "must increase"),
    "priors too few": (r"      - \{dist: uniform.*\n", "", "prior:", "1 distributions", "one or 2"),
    "prior no mapping": (r"- \{dist: uniform.*\}", "- wide", "wide", "'wide'", "{dist: norm"),
    "prior a number": (
        r"(?s)prior:\n      - .*?  doppler",
        "prior: 3\n  doppler",
        "prior: 3",
        "is 3",
    ),
    "no dist": ("dist: hui_rutledge, ", "", "doppler:", "lacks 'model.doppler.dist'"),
    "argument is text": ("df: 4", "df: four", "four", "step.df is 'four'", "a number"),
    "anchor no pivot": ("log_nhi: 17.5", "log_nhi: 18.0", "18.0", "18, must be one", "12, 15"),
    "wrong kind": ("kind: walk", "kind: walks", "walks", "walk | independent", "mean 'walk'"),
    "odd walkers": ("walkers: 64", "walkers: 65", "65", "even and at least 14", "7 parameters"),
    "few walkers": ("walkers: 32", "walkers: 12", "12}", "at least 14", "'lowest'"),
    "components": (r"\[2, 3\]", "[2]", "[2]", "1 numbers, must be 2"),
    "redshifts back": (r"\[2.0, 2.5\]", "[2.5, 2.0]", "[2.5, 2.0]", "2 follows 2.5"),
    "stop before start": ("stop: 2.3", "stop: 1.3", "stop", "1.3", "at least start = 2"),
    "too many redshifts": ("step: 0.1", "step: 1.0e-9", "e-9", "10000"),
    "half a grid": (", step: 0.1", "", "start", "lacks 'derive.redshifts.step'"),
    "grid key": ("step: 0.1", "stepp: 0.1", "stepp", "derive.redshifts.stepp'", "mean 'step'"),
    "grid of text": (r"\{start.*?\}", "all", "all}", "'all'", "a list of redshifts"),
    "no analyses": (r"(?s)analyses:.*", "", None, "lacks 'analyses'"),
    "empty analyses": (r"(?s)analyses:.*", "analyses: {}", "analyses", "mapping from names"),
    "analysis no mapping": (r"(?s)  again:.*", "  again: all", "again", "is 'all'", "a mapping"),
    "name is a path": ("again:", "a/b:", "a/b:", "'a/b'", "letters, digits"),
    "name is reserved": ("again:", "comparison:", "comparison:", "another name"),
    "name is a number": ("again:", "2020:", "2020:", "2020 is not text", "quotes"),
    "no datasets": (r"    datasets: \[data/b.*\n", "    exclude: []\n", "joint:", "'datasets'"),
    "datasets a string": (r"\[data/c.ecsv\]", "data/c.ecsv", "data/c.ecsv", "a list of file"),
    "datasets of numbers": (r"\[data/c.ecsv\]", "[1]", "[1]", "again.datasets[0] is 1"),
    "no such file": ("data/c.ecsv", "data/cc.ecsv", "cc.ecsv", "no such file", "'data/c.ecsv'?"),
    "no such folder": ("data/c.ecsv", "dada/c.ecsv", "dada", "folder 'dada' does not exist"),
    "empty glob": (r"data/\*.ecsv", "data/*.csv", "*.csv", "glob 'data/*.csv' matches no file"),
    "useless exclude": (r"data/c\*.ecsv", "data/d*.ecsv", "data/d*", "no data set matches"),
    "all excluded": (r"data/c\*.ecsv", "data/*", "[data/*]", "excludes every data set"),
    "unknown base": ("base: lowest", "base: lowst", "lowst", "'lowst'", "mean 'lowest'"),
    "circle": (
        "    datasets: \\[data/b",
        "    base: again\n    datasets: [data/b",
        "base: ",
        "circle",
    ),
    "no previous results": (
        "analyses:",
        "compare_with: data/old\nanalyses:",
        "data/old",
        "there is no such folder",
    ),
    "previous results of others": (
        "analyses:",
        "compare_with: data\nanalyses:",
        "compare_with: data",
        "has results of none of the analyses",
    ),
    "an overlay that is none": (
        "analyses:",
        "overlays: [Incidence/lx dla]\nanalyses:",
        "overlays",
        "table/curve",
    ),
    "a group of nothing known": (
        "analyses:",
        "checks: {groups: {both: [bb, c]}}\nanalyses:",
        "both",
        "no data set 'bb'",
    ),
    "family of strangers": (
        "analyses:",
        "families: {both: [joint, jont]}\nanalyses:",
        "both",
        "'jont' is no analysis",
    ),
    "family of one": (
        "analyses:",
        "families: {both: [joint, joint]}\nanalyses:",
        "both",
        "two different analyses",
    ),
    "family of other data": (
        "analyses:",
        "families: {both: [joint, again]}\nanalyses:",
        "both",
        "only models of the same data",
    ),
    "analysis named as families": ("again:", "families:", "families:", "another name"),
    "own base": ("base: joint", "base: low", "base: low", "circle"),
    "base a number": ("base: lowest", "base: 3", "base: 3", "name of another analysis"),
    "key twice": ("seed: 7", "seed: 7\n  seed: 8", "seed: 8", "'sampler.seed' stands twice", "19"),
    "broken YAML": ("seed: 7", "seed: [7", "warm_up", "not valid YAML"),
    "own alias": ("seed: 7", "seed: &s [*s]", "seed:", "refers to itself"),
    "python tag": ("seed: 7", "seed: !!python/object:int 7", "seed:", "cannot read"),
}


@pytest.mark.parametrize("case", BAD.values(), ids=BAD.keys())
def test_fault_names_line_and_reason(folder, case):
    old, new, at, *words = case
    text = re.sub(old, new, FULL, count=1)
    assert text != FULL
    found = faults(folder, text)
    at, nth = at if isinstance(at, tuple) else (at, 1)
    line = [i for i, line in enumerate(text.split("\n"), 1) if at is None or at in line][nth - 1]
    here = [what for where, what in found if where == line]
    assert any(all(word in what for word in words) for what in here), (line, found)


def test_every_fault_at_once(folder):
    text = FULL.replace("H0: 70.0", "H0: 0.7").replace("seed: 7", "sed: 7")
    text = text.replace("data/c.ecsv", "data/d.ecsv").replace("kind: walk", "kind: runs")
    assert [line for line, _ in faults(folder, text)] == [1, 14, 19, 44]


def test_inherited_fault_is_told_once(folder):
    assert len(faults(folder, FULL.replace("15.0, 17.5", "17.5, 15.0"))) == 1


@pytest.mark.parametrize("text", ["", "- 1\n", "3\n", "# nothing\n"])
def test_config_that_is_no_mapping(folder, text):
    assert faults(folder, text) == [
        (1, "config must be a mapping with the keys cosmology, model, analyses")
    ]


@pytest.mark.parametrize("character", ["\x85", "\u2028", "\u2029"])
def test_line_ends_of_yaml_alone_do_not_shift_lines(folder, character):
    text = FULL.replace("model:", f"# {character}\nmodel:", 1).replace("seed: 7", "sed: 7")
    assert [line for line, _ in faults(folder, text)] == [20]


def test_missing_config(folder):
    with pytest.raises(InputError, match=r"none\.yaml:1: no such file"):
        load_config("none.yaml")


def test_mapping_without_file_names_places(folder):
    config = yaml.safe_load(FULL)
    config["sampler"]["walkers"] = 3
    with pytest.raises(InputError, match=r"config:1: sampler\.walkers is 3"):
        parse_config(config)


@pytest.mark.parametrize(
    ("old", "new", "at", "words"),
    [
        ("dist: uniform, loc: -1.0", "dist: unifrm, loc: -1.0", "unifrm", "uniform"),
        ("{dist: t, df: 4, scale: 0.5}", "{dist: t, scale: 0.5}", "dist: t", "df"),
        ("loc: -17.0, scale: 1.0", "loc: -17.0, scal: 1.0", "scal: 1.0", "scale"),
        ("b_sigma: 24.0", "b: 24.0", "hui_rutledge", "b_sigma"),
        ("first: {dist: norm, loc: 1.6", "first: {dist: uniform, loc: -3.0", "first", "positive"),
        ("{dist: fixed, b: 30.0}", "{dist: fixed, b: -30.0}", "fixed", "-30"),
    ],
)
def test_distributions_are_checked_apart(folder, old, new, at, words):
    text = FULL.replace(old, new)
    study = load(folder, text)
    document = read_yaml("config.yaml")
    (fault,) = check_distributions(study, "config.yaml", document.line)
    line = next(i for i, line in enumerate(text.split("\n"), 1) if at in line)
    assert (fault.path, fault.line) == ("config.yaml", line)
    assert words in fault.what


# The reference, and what importing costs


def test_reference_in_the_docs_is_that_of_the_schema():
    text = (ROOT / "config" / "README.md").read_text(encoding="utf-8")
    assert update(text) == text, "run: python -m fogline.config_reference config/README.md"


def test_every_key_is_described():
    def undescribed(node, place):
        for key, child in node.get("properties", {}).items():
            target = schema()["$defs"].get(child.get("$ref", "").rsplit("/", 1)[-1], {})
            if "description" not in {**target, **child}:
                yield (*place, key)
            yield from undescribed(child, (*place, key))
            for branch in child.get("anyOf", ()):
                yield from undescribed(branch, (*place, key))

    assert list(undescribed(schema(), ())) == []
    for name, node in schema()["$defs"].items():
        assert list(undescribed(node, (name,))) == []


def test_workflow_import_is_light():
    code = "import sys, fogline.config; print(*({'numpy', 'scipy', 'astropy'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == ""


# Whatever is done to a config, the answer is a study or faults


PIECES = (
    *("\n", "  ", "- ", "{", "}", "[", "]", ": ", "&a ", "*a", "<<: ", "'", "#", "|", "!!set "),
    *(
        ".nan",
        ".inf",
        "-1",
        "1e400",
        "9" * 25,
        "null",
        "yes",
        "2026-01-01",
        "\t",
        "\x07",
        "**",
        "?",
    ),
    *("dist", "base", "exclude", "pivots", "data/*", "/", "\u2028", "!!binary x", "? {a: b}\n: "),
)


@st.composite
def mutated(draw) -> str:
    text = draw(st.sampled_from([MINIMAL, FULL]))
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(text)))
        end = min(len(text), start + draw(st.integers(0, 12)))
        text = text[:start] + draw(st.text(max_size=5) | st.sampled_from(PIECES)) + text[end:]
    return text


@settings(max_examples=250, deadline=None, suppress_health_check=list(HealthCheck))
@given(text=mutated())
def test_mutated_config_gives_a_study_or_faults(folder, text):
    (folder / "mutated.yaml").write_bytes(text.encode("utf-8", "surrogatepass"))
    try:
        study, found = load_config("mutated.yaml"), ()
    except InputError as error:
        study, found = None, error.faults
    n_lines = len(re.split("\r\n|\r|\n", text))
    assert all(1 <= fault.line <= n_lines for fault in found)
    assert found or all(analysis.datasets for analysis in study.analyses.values())
