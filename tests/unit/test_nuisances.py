"""Nuisance parameters: from meta and config to parameters, priors and points."""

import dataclasses

import numpy as np
import pytest
from scipy import stats

from fogline.config import parse_config
from fogline.constraint_files import read_constraint_file
from fogline.datasets import hypothetical
from fogline.faults import InputError
from fogline.inputs import with_nuisances
from fogline.nuisances import nuisances_of
from fogline.points import read_point
from fogline.priors import Prior
from fogline.templates import template
from small_study import ANALYSIS, MODEL

SCALE = {"dist": "norm", "loc": 1.0, "scale": 0.05}
SCATTER = {"dist": "halfnorm", "scale": 0.1}


def data_set(name, **meta):
    return dataclasses.replace(hypothetical("lya_opacity", [2.5], **meta), name=name, path=name)


def test_parameters_follow_those_of_the_model():
    nuisances = nuisances_of([data_set("a", scale=SCALE, scatter=SCATTER), data_set("b")])
    prior = Prior(MODEL, nuisances)
    assert prior.names[-2:] == ("scale[a]", "scatter[a]")
    assert prior.n_dim == Prior(MODEL).n_dim + 2
    assert prior.coordinate_names[-2:] == prior.names[-2:]


def test_priors_are_cut_to_positive_values():
    wide = {"dist": "norm", "loc": 0.5, "scale": 1.0}
    prior = Prior(MODEL, nuisances_of([data_set("a", scale=wide, scatter=SCATTER)]))
    x = np.random.default_rng(3).standard_normal((20_000, prior.n_dim))
    scale, scatter = prior.to_parameters(x)[:, -2:].T
    assert scale.min() > 0.0
    assert stats.kstest(scale, stats.truncnorm(-0.5, np.inf, 0.5, 1.0).cdf).pvalue > 1e-3
    assert stats.kstest(scatter, stats.halfnorm(scale=0.1).cdf).pvalue > 1e-3


def test_config_comes_before_the_file():
    data = [data_set("a", scale=SCALE), data_set("b", scatter=SCATTER)]
    analysis = dataclasses.replace(
        ANALYSIS, nuisances={"a": {"scale": SCATTER, "student_dof": 4}, "b": {"scatter": None}}
    )
    changed = with_nuisances(data, analysis)
    assert changed[0].meta["scale"] == SCATTER
    assert changed[0].meta["student_dof"] == 4
    assert [n.name for n in nuisances_of(changed)] == ["scale[a]"]


def test_counts_take_a_scale_but_no_scatter():
    counts = dataclasses.replace(data_set("n"), counts=True)
    good = dataclasses.replace(ANALYSIS, nuisances={"n": {"scale": SCALE}})
    assert with_nuisances([counts], good)[0].meta["scale"] == SCALE
    bad = dataclasses.replace(ANALYSIS, nuisances={"n": {"scatter": SCATTER}})
    with pytest.raises(
        InputError, match="scatter in the config's nuisances has no effect on count"
    ):
        with_nuisances([counts], bad)


# In a file's meta


def with_meta(tmp_path, lines, quantity="lya_opacity"):
    text = template(quantity).replace("# schema:", f"{lines}\n# schema:")
    (tmp_path / "a.ecsv").write_text(text, encoding="utf-8")
    return read_constraint_file(tmp_path / "a.ecsv")


def test_file_states_its_nuisances(tmp_path):
    lines = f"#   scale: {SCALE}\n#   scatter: {SCATTER}\n#   student_dof: 5".replace("'", "")
    data = with_meta(tmp_path, lines)
    assert data.meta["scale"] == SCALE
    assert data.meta["student_dof"] == 5.0


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ("#   scale: 1.05", "scale is 1.05, must be a distribution such as"),
        ("#   scale: {dist: nrom, loc: 1.0}", "scale: unknown distribution 'nrom'; did you mean"),
        ("#   scatter: {dist: norm, loc: -50, scale: 0.1}", "must reach positive values"),
        ("#   student_dof: 0.5", "student_dof is 0.5, must be a number in [1, 1000]"),
    ],
)
def test_faults_in_a_files_nuisances(tmp_path, line, words):
    with pytest.raises(InputError, match=r"a\.ecsv:\d+: ") as caught:
        with_meta(tmp_path, line)
    assert words in str(caught.value)


# In a config

CONFIG = {
    "cosmology": {"H0": 70.0, "Om0": 0.3},
    "model": {
        "reference_redshift": 2.5,
        "pivots": [12.0, 15.0, 18.0, 20.3, 22.5],
        "evolution": {"pivots": [14.0, 20.0], "prior": {"dist": "norm", "loc": 1.5, "scale": 1.5}},
    },
    "sampler": {"walkers": 64},
    "analyses": {"joint": {"datasets": ["lya.ecsv"]}},
}


def parsed(tmp_path, monkeypatch, **changes):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "lya.ecsv").write_text("", encoding="utf-8")
    model = {**CONFIG["model"], **changes.pop("model", {})}
    return parse_config({**CONFIG, "model": model, **changes})


def test_wider_models_from_a_config(tmp_path, monkeypatch):
    study = parsed(
        tmp_path,
        monkeypatch,
        model={
            "evolution": {**CONFIG["model"]["evolution"], "breaks": [3.0]},
            "doppler": {"dist": "fixed", "b": {"dist": "norm", "loc": 26.0, "scale": 3.0}},
            "high_column": {"form": "gamma", "above": 20.3, "prior": {"log_nc": SCALE}},
        },
        nuisances={"lya": {"scale": SCALE}},
    )
    analysis = study.analyses["joint"]
    assert analysis.model.pivots == (12.0, 15.0, 18.0, 20.3)
    assert analysis.model.column_range == (12.0, 22.5)
    assert analysis.model.high_column.priors[1] == SCALE
    assert analysis.nuisances == {"lya": {"scale": SCALE}}
    assert Prior(analysis.model).names[4:] == (
        "evolution[14.0, z<3]",
        "evolution[20.0, z<3]",
        "evolution[14.0, z>3]",
        "evolution[20.0, z>3]",
        "gamma[slope]",
        "gamma[log_nc]",
        "doppler[b]",
    )


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"nuisances": {"lyb": {"scale": SCALE}}}, "has no data set 'lyb'; did you mean 'lya'"),
        ({"nuisances": {"lya": {"scael": SCALE}}}, "unknown key 'nuisances.lya.scael'"),
        ({"nuisances": {"lya": {"scale": 1.0}}}, "nuisances.lya.scale is 1.0, must be a distrib"),
        ({"nuisances": {"lya": {"student_dof": 0}}}, "student_dof is 0, must be"),
        (
            {"model": {"high_column": {"form": "gama", "above": 20.3}}},
            "model.high_column.form is 'gama'",
        ),
        (
            {"model": {"high_column": {"form": "gamma", "above": 20.0}}},
            "model.high_column.above is 20, must be one of the pivots 18, 20.3",
        ),
        ({"model": {"high_column": {"form": "gamma"}}}, "lacks 'model.high_column.above'"),
        (
            {"model": {"high_column": {"form": "discs", "above": 20.3, "prior": {"n0": SCALE}}}},
            "discs has no parameter 'n0'",
        ),
        (
            {"model": {"evolution": {**CONFIG["model"]["evolution"], "breaks": [3.0, 2.0]}}},
            "model.evolution.breaks must increase, but 2 follows 3",
        ),
    ],
)
def test_faults_of_wider_models(tmp_path, monkeypatch, changes, words):
    with pytest.raises(InputError, match="config:1: ") as caught:
        parsed(tmp_path, monkeypatch, **changes)
    assert words in str(caught.value)


# Points

WIDE = dataclasses.replace(
    MODEL,
    evolution=dataclasses.replace(MODEL.evolution, breaks=(3.0,)),
    doppler={"dist": "fixed", "b": {"dist": "norm", "loc": 26.0, "scale": 3.0}},
)
POINT = f"""\
log_f: {list(range(-10, -20, -1))}
evolution: [[1.0, 1.5, 2.0], [3.0, 3.5, 4.0]]
doppler: 25.0
nuisances: {{"scale[a]": 1.02}}
"""


def test_point_of_a_wider_model(tmp_path):
    (tmp_path / "p.yaml").write_text(POINT, encoding="utf-8")
    point = read_point(tmp_path / "p.yaml", WIDE)
    assert point.theta[10:].tolist() == [1.0, 1.5, 2.0, 3.0, 3.5, 4.0, 25.0]
    nuisances = nuisances_of([data_set("a", scale=SCALE, scatter=SCATTER)])
    assert point.with_nuisances(nuisances)[-2:].tolist() == [1.02, 0.0]
    with pytest.raises(InputError, match=r"p\.yaml:4: the analysis has no nuisance parameter"):
        point.with_nuisances([])


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("doppler: 25.0\n", "", "lacks 'doppler'"),
        ("[[1.0, 1.5, 2.0], [3.0, 3.5, 4.0]]", "[1.0, 1.5, 2.0]", "must be a list of 2 lists"),
        ("[3.0, 3.5, 4.0]", "[3.0, 3.5]", "evolution[1] lists 2 numbers, must be 3"),
        ("doppler: 25.0", "doppler: wide", "doppler is 'wide', must be a finite number"),
    ],
)
def test_faults_of_a_wider_point(tmp_path, old, new, words):
    (tmp_path / "p.yaml").write_text(POINT.replace(old, new), encoding="utf-8")
    with pytest.raises(InputError, match=r"p\.yaml:\d: ") as caught:
        read_point(tmp_path / "p.yaml", WIDE)
    assert words in str(caught.value)
