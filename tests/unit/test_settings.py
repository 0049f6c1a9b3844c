"""Settings survive JSON, as the response file keeps them."""

import dataclasses
import json

import pytest

from fogline.provenance import to_json
from fogline.settings import analysis_from_plain
from small_study import ANALYSIS


def test_analysis_survives_json():
    again = analysis_from_plain(json.loads(to_json(ANALYSIS)))
    assert again == ANALYSIS
    assert isinstance(again.model.pivots, tuple)
    assert isinstance(again.model.evolution.priors, tuple)


def test_optional_values_survive_json():
    prior = dataclasses.replace(ANALYSIS.model.prior, slope_kind="independent", slope_step=None)
    analysis = dataclasses.replace(
        ANALYSIS,
        model=dataclasses.replace(ANALYSIS.model, prior=prior),
        cosmology=dataclasses.replace(ANALYSIS.cosmology, Ode0=0.65),
    )
    assert analysis_from_plain(json.loads(to_json(analysis))) == analysis


def test_settings_are_frozen():
    with pytest.raises(dataclasses.FrozenInstanceError, match="name"):
        ANALYSIS.name = "other"
