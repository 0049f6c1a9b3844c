"""Tables beside constraint files: templates, units, faults."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from fogline.faults import InputError
from fogline.filters import read_filters
from fogline.side_tables import SIDE_TABLES, read_side_table, side_kind, side_template


@pytest.fixture
def write(tmp_path):
    def run(text):
        path = tmp_path / "side.ecsv"
        path.write_text(text, encoding="utf-8")
        return str(path)

    return run


@pytest.mark.parametrize("kind", SIDE_TABLES)
def test_every_template_reads_back(write, kind):
    path = write(side_template(kind))
    assert side_kind(path) == kind
    columns = read_side_table(path, kind)
    for column in SIDE_TABLES[kind].columns:
        if not column.optional:
            assert_allclose(columns[column.name], column.examples, rtol=1e-12)


def test_units_are_converted(write):
    text = side_template("filter").replace("unit: Angstrom", "unit: nm")
    assert read_side_table(write(text))["wavelength"][0] == pytest.approx(33000.0)


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        (
            "kind: filter",
            "kind: fliter",
            "side.ecsv:9: unknown kind 'fliter'; did you mean",
        ),
        ("  kind: filter\n", "  name: u\n", "meta lacks 'kind', must be filter"),
        ("unit: Angstrom", "unit: Hz", "unit of column 'wavelength' is 'Hz'"),
        ("3400 0.8", "3200 0.8", "wavelength is 3200, must be greater than in the row before"),
        ("3400 0.8", "3400 -0.8", "throughput is -0.8, must be"),
        ("throughput", "troughput", "unknown column 'troughput'; did you mean 'throughput'"),
    ],
)
def test_faults_of_a_filter(write, old, new, words):
    text = side_template("filter")
    assert old in text
    with pytest.raises(InputError, match=r"side\.ecsv:\d+: ") as caught:
        read_side_table(write(text.replace(old, new)), "filter")
    assert words in str(caught.value)


def test_wrong_kind_is_told(write):
    with pytest.raises(InputError, match="kind is emissivity, must be filter"):
        read_filters([write(side_template("emissivity"))])


def test_top_hats_in_both_frames(write):
    rest, observed, curve = read_filters([
        {"name": "a", "lo": 880.0, "hi": 910.0, "frame": "rest"},
        {"name": "b", "lo": 3300.0, "hi": 4000.0},
        write(side_template("filter")),
    ])  # fmt: skip
    assert rest.nodes(3.0)[0].min() > 880.0 * 4.0
    assert rest.nodes(3.0)[0].max() < 910.0 * 4.0
    assert_allclose(observed.nodes(3.0)[0], observed.nodes(1.0)[0])
    for one in (rest, observed, curve):
        assert one.nodes(2.0)[1].sum() == pytest.approx(1.0, rel=1e-12)
    # The trapezoid of the template is symmetric about 3600 Å.
    wavelength, weights = curve.nodes(0.0)
    assert wavelength @ weights == pytest.approx(3600.0, abs=0.5)
    assert np.all(weights[wavelength < 3400.0] < weights.max())
