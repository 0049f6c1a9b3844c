"""The response as a whole: order of rows, many parameter vectors, linearity in f."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from fogline.datasets import hypothetical
from fogline.response import CHUNK, build_response
from small_study import EXPONENTS, LOG_F, SETTING, THETA, empty_datasets

RESPONSE = build_response(empty_datasets(), SETTING)


def test_rows_follow_one_another_as_the_data_sets_do():
    together = RESPONSE.predict(THETA)
    assert together.shape == (12,)
    for data, rows in zip(RESPONSE.datasets, RESPONSE.slices, strict=True):
        alone = build_response([data], SETTING).predict(THETA)
        assert_allclose(together[rows], alone, rtol=1e-12)


def test_many_vectors_are_predicted_as_each_alone():
    rng = np.random.default_rng(4)
    theta = THETA + 0.1 * rng.standard_normal((7, 13))
    expected = [RESPONSE.predict(row) for row in theta]
    assert_allclose(RESPONSE.predict(theta), expected, rtol=1e-12)
    assert RESPONSE.predict(theta[:1]).shape == (1, 12)


def test_chunks_do_not_show():
    n = 2 * CHUNK + 3
    theta = THETA + np.linspace(-0.1, 0.1, n)[:, None]
    some = [0, CHUNK - 1, CHUNK, 2 * CHUNK + 2]
    assert_allclose(RESPONSE.predict(theta)[some], RESPONSE.predict(theta[some]), rtol=1e-12)


def test_raw_predictions_are_linear_in_f():
    doubled = np.array([*(np.array(LOG_F) + np.log10(2.0)), *EXPONENTS])
    ratio = RESPONSE.predict(doubled) / RESPONSE.predict(THETA)
    by_name = {d.name: ratio[s] for d, s in zip(RESPONSE.datasets, RESPONSE.slices, strict=True)}
    for name in ("lya", "lls", "dla", "density"):
        assert_allclose(by_name[name], 2.0, rtol=1e-12, err_msg=name)
    assert_allclose(by_name["local"], 0.5, rtol=1e-12)
    # Only the solved length is not: along the path the depth grows ever more slowly.
    assert 0.3 < by_name["unit_depth"][0] < 0.49


def test_data_are_not_altered():
    before = empty_datasets()
    build_response(before, SETTING)
    for data, again in zip(before, empty_datasets(), strict=True):
        assert_array_equal(data.z_lo, again.z_lo)
        assert data.meta == again.meta


def test_columns_beyond_the_pivots_are_refused():
    data = hypothetical("lya_opacity", [2.4], form="tau", log_nhi_min=11.0, log_nhi_max=17.2)
    with pytest.raises(ValueError, match="pivots"):
        build_response([data], SETTING).predict(THETA)
