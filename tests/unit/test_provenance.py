"""Hashes change with what they cover, and with nothing else."""

import dataclasses
import hashlib

import pytest

import fogline.provenance as provenance
from fogline.provenance import code_hash, file_hash, import_closure, settings_hash, to_json
from small_study import ANALYSIS


@pytest.fixture
def package(tmp_path, monkeypatch):
    """A package named fogline of four modules: a -> b -> c, and d by itself."""
    root = tmp_path / "fogline"
    (root / "b").mkdir(parents=True)
    (root / "__init__.py").write_text("")
    (root / "a.py").write_text("from fogline.b import (\n    c,\n    thing,\n)\n")
    (root / "b" / "__init__.py").write_text("thing = 1\n")
    (root / "b" / "c.py").write_text("def f():\n    import fogline.e\n")
    (root / "d.py").write_text("import numpy\nx = 1\n")
    (root / "e.py").write_text("y = 2\n")
    monkeypatch.setattr(provenance, "PACKAGE_ROOT", root)
    yield root
    forget()


def forget():
    """Clear the hashes of the process, as a new process would have none."""
    code_hash.cache_clear()
    provenance._imports.cache_clear()


def names(*modules):
    paths = import_closure(modules)
    return {path.relative_to(provenance.PACKAGE_ROOT).as_posix() for path in paths}


def test_closure_follows_imports_of_every_form(package):
    forget()
    assert names("fogline.a") == {"a.py", "b/__init__.py", "b/c.py", "e.py"}
    assert names("fogline.d") == {"d.py"}
    assert names("fogline.d", "fogline.e") == {"d.py", "e.py"}


@pytest.mark.parametrize(("changed", "moves"), [("b/c.py", True), ("e.py", True), ("d.py", False)])
def test_code_hash_changes_with_the_closure_alone(package, changed, moves):
    forget()
    before = code_hash("fogline.a")
    path = package / changed
    path.write_text(path.read_text() + "# changed\n")
    forget()
    assert (code_hash("fogline.a") != before) is moves


def test_unknown_modules_are_refused():
    with pytest.raises(ValueError, match=r"no module of the package: fogline\.nowhere"):
        code_hash("fogline.posterior", "fogline.nowhere")


def test_posterior_depends_on_all_physics_but_on_no_figure():
    forget()
    closure = names("fogline.posterior")
    wanted = {
        "likelihood/rows.py",
        "priors.py",
        "spline.py",
        "unit_depth.py",
        "atomic.py",
        "doppler.py",
    }
    assert wanted | {"quantities/mean_free_path.py", "quadrature.py"} <= closure
    assert not any(path.startswith(("figures/", "commands/", "derived/")) for path in closure)


def test_file_hash_is_sha256(tmp_path):
    path = tmp_path / "data.ecsv"
    path.write_bytes(b"1 2 3\n")
    assert file_hash(path) == hashlib.sha256(b"1 2 3\n").hexdigest()[:16]


def test_settings_hash_sees_values_not_objects():
    same = dataclasses.replace(ANALYSIS)
    assert settings_hash(same) == settings_hash(ANALYSIS)
    moved = dataclasses.replace(ANALYSIS.sampler, seed=ANALYSIS.sampler.seed + 1)
    assert settings_hash(moved) != settings_hash(ANALYSIS.sampler)
    # The order of keys is no setting, the order of values is.
    assert settings_hash({"a": 1, "b": 2}) == settings_hash({"b": 2, "a": 1})
    assert settings_hash([1, 2]) != settings_hash([2, 1])


def test_what_is_no_setting_is_refused():
    with pytest.raises(TypeError, match="cannot be written as JSON"):
        to_json({"a": object()})
