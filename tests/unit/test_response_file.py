"""A fit written and read again is the same bit for bit."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from fogline.cosmology import Cosmology
from fogline.datasets import DataSet
from fogline.response_file import ARRAYS, build_fit, load_fit, save_fit
from small_study import ANALYSIS, COSMOLOGY, PRIOR, THETA, empty_datasets, measured


@pytest.fixture
def datasets(tmp_path):
    """Data sets of every quantity; one with a cosmology, a limit, labels and its lines."""
    data = []
    for one in empty_datasets():
        path = tmp_path / one.path
        path.write_text(f"the file of {one.name}\n")
        data.append(measured(dataclasses.replace(one, path=str(path)), np.ones(one.n_rows)))
    data[2] = dataclasses.replace(
        data[2],
        cosmology=Cosmology(72.0, 0.26, 0.7),
        limit=np.array([0, -1]),
        labels=("low z", "λ at high z"),
        lines=(17, 18),
        z_hi=data[2].z_lo + np.array([0.0, 0.3]),
    )
    return data


@pytest.fixture
def fit(datasets):
    return build_fit(ANALYSIS, datasets)


def test_round_trip_is_bit_identical(fit, tmp_path):
    save_fit(fit, tmp_path / "response.h5")
    again = load_fit(tmp_path / "response.h5")
    assert again.analysis == fit.analysis
    assert again.provenance == fit.provenance
    for before, after in zip(fit.response.datasets, again.response.datasets, strict=True):
        for field in dataclasses.fields(DataSet):
            left, right = getattr(before, field.name), getattr(after, field.name)
            if field.name in ARRAYS:
                assert_array_equal(left, right, strict=True)
            else:
                assert left == right
    for before, after in zip(fit.response.blocks, again.response.blocks, strict=True):
        assert before.constants.keys() == after.constants.keys()
        pairs = [(getattr(before, n), getattr(after, n)) for n in ("log_nhi", "z", "weights")]
        pairs += [(before.constants[n], after.constants[n]) for n in before.constants]
        for left, right in pairs:
            assert_array_equal(left, right, strict=True)
    x = np.random.default_rng(0).normal(size=(9, 13))
    theta = PRIOR.to_parameters(x)
    assert_array_equal(fit.response.predict(theta), again.response.predict(theta))
    assert_array_equal(fit.posterior.ln_prob(x), again.posterior.ln_prob(x))


def test_saving_twice_replaces_the_file_and_leaves_nothing_beside_it(fit, tmp_path):
    folder = tmp_path / "results"
    for _ in range(2):
        save_fit(fit, folder / "response.h5")
    assert [path.name for path in folder.iterdir()] == ["response.h5"]


def test_sampler_settings_may_change_later_but_the_model_may_not(fit, tmp_path):
    save_fit(fit, tmp_path / "response.h5")
    sampler = dataclasses.replace(ANALYSIS.sampler, walkers=64)
    later = dataclasses.replace(
        ANALYSIS, sampler=sampler, cosmology=dataclasses.replace(COSMOLOGY, H0=50.0)
    )
    again = load_fit(tmp_path / "response.h5", later)
    assert again.analysis.sampler.walkers == 64
    assert again.analysis.cosmology == COSMOLOGY
    assert_array_equal(again.response.predict(THETA), fit.response.predict(THETA))


def test_fingerprint_follows_data_model_and_cosmology(fit, datasets, tmp_path):
    assert build_fit(ANALYSIS, datasets).fingerprint == fit.fingerprint
    sampler = dataclasses.replace(ANALYSIS.sampler, seed=8)
    same = build_fit(dataclasses.replace(ANALYSIS, sampler=sampler), datasets)
    assert same.fingerprint == fit.fingerprint
    seen = {fit.fingerprint}
    other_cosmology = dataclasses.replace(COSMOLOGY, Om0=0.31)
    seen.add(
        build_fit(dataclasses.replace(ANALYSIS, cosmology=other_cosmology), datasets).fingerprint
    )
    doppler = {"dist": "fixed", "b": 27.0}
    model = dataclasses.replace(ANALYSIS.model, doppler=doppler)
    seen.add(build_fit(dataclasses.replace(ANALYSIS, model=model), datasets).fingerprint)
    (tmp_path / "lya.ecsv").write_text("another value\n")
    seen.add(build_fit(ANALYSIS, datasets).fingerprint)
    assert len(seen) == 4


def test_provenance_names_every_input(fit, datasets):
    assert set(fit.provenance["inputs"]) == {data.path for data in datasets}
    meta = fit.table_meta()
    assert meta["analysis"] == "small"
    assert meta["cosmology"] == {"H0": 70.0, "Om0": 0.3, "Ode0": None}
    assert meta["fingerprint"] == fit.fingerprint
