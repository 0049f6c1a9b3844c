"""What the documents promise is what the code does."""

import re
from pathlib import Path

import numpy as np
import pytest

from fogline import plan
from fogline.atomic import LYMAN_SERIES, equivalent_width
from fogline.constraint_files import read_constraint_file
from fogline.cosmology import Cosmology
from fogline.derived import DERIVED_TABLES
from fogline.distribution import ColumnDistribution
from fogline.figures import FIGURES
from fogline.quantities import FILE_SPECS, QUANTITIES, Setting
from fogline.response import build_response
from fogline.templates import template

PROJECT = Path(__file__).parents[2]


@pytest.fixture
def example(monkeypatch):
    """The worked example of the contributor's guide, registered."""
    text = (PROJECT / "DEVELOPERS.md").read_text()
    code = re.search(r"```python\n(.*?)```", text, re.DOTALL).group(1)
    module: dict = {}
    exec(compile(code, "DEVELOPERS.md", "exec"), module)
    quantity = module["LybOpacity"]()
    monkeypatch.setitem(QUANTITIES, "lyb_opacity", quantity)
    monkeypatch.setitem(FILE_SPECS, "lyb_opacity", quantity.spec)
    return quantity


def test_example_quantity_reads_its_template_and_predicts(example, tmp_path: Path) -> None:
    path = tmp_path / "lyb.ecsv"
    path.write_text(template("lyb_opacity"))
    data = read_constraint_file(path)
    distribution = ColumnDistribution(2.5, (12.0, 15.0, 18.0), (14.0,))
    setting = Setting(distribution, Cosmology(70.0, 0.3), {"dist": "fixed", "b": 26.0})
    theta = np.array([-10.0, -14.5, -19.0, 1.5])
    predicted = build_response([data], setting).predict(theta)
    log_nhi = np.linspace(12.0, 17.2, 20001)
    width = equivalent_width(log_nhi, 26.0, LYMAN_SERIES[1]) / LYMAN_SERIES[1].wavelength
    for z, value in zip(data.z, predicted, strict=True):
        f = 10.0 ** distribution.log_f(theta, log_nhi, z)
        summed = np.trapezoid(f * width * 10.0**log_nhi * np.log(10.0), log_nhi)
        expected = (1.0 + z) * setting.cosmology.dx_dz(z) * summed
        np.testing.assert_allclose(value, expected, rtol=1e-5)


def test_light_lists_of_names_agree_with_the_registries() -> None:
    assert plan.DERIVED == tuple(DERIVED_TABLES)
    assert plan.FIGURES == tuple(FIGURES)


def test_every_figure_has_a_caption_of_its_own() -> None:
    captions = [PROJECT / "workflow/report" / f"{name}.rst" for name in (*FIGURES, "shifts")]
    texts = [path.read_text() for path in captions]
    assert all(len(text) > 100 for text in texts)
    assert len(set(texts)) == len(texts)


def test_readme_has_the_two_lines_and_every_quantity() -> None:
    text = (PROJECT / "README.md").read_text()
    venv = "python3 -m venv .venv && . .venv/bin/activate && pip install -c constraints.txt -e "
    assert f"\n{venv}. && snakemake --cores all\n" in text
    assert f"\n{venv}'.[test]' && pytest\n" in text
    assert all(f"`{name}`" in text or f"{name} >" in text for name in QUANTITIES)


def test_constraints_pin_everything_and_name_no_host() -> None:
    lines = (PROJECT / "constraints.txt").read_text().splitlines()
    pins = [line for line in lines if not line.startswith("#")]
    assert all(re.fullmatch(r"[a-z0-9._-]+==[^ ;]+( ; python_version .*)?", pin) for pin in pins)
    assert not [line for line in lines if "://" in line or "--" in line]


def test_scripts_are_thin() -> None:
    for path in (PROJECT / "workflow/scripts").glob("*.py"):
        assert len(path.read_text().splitlines()) <= 25, path.name


def test_facade_resolves_every_name() -> None:
    import fogline

    for name in fogline.__all__:
        assert getattr(fogline, name) is not None
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        fogline.nothing  # noqa: B018
