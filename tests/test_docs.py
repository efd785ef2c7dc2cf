"""What the documents and docstrings show is true: their examples are run."""

import doctest
import importlib
import pkgutil
import re
import tomllib
from pathlib import Path

import numpy as np
import pytest

import dda
import shapes
from dda.cli import main
from dda.study.particle import build_particle
from dda.study.reader import read_study, study_from_tables

ROOT = Path(__file__).parent.parent
EXAMPLES = sorted((ROOT / "dda/study/examples").glob("*.toml"))
README = (ROOT / "README.md").read_text(encoding="utf-8")
MODULES = sorted(
    module.name
    for package in (dda, shapes)
    for module in pkgutil.walk_packages(package.__path__, package.__name__ + ".")
)


def _blocks(language):
    return re.findall(rf"^```{language}\n(.*?)^```", README, re.MULTILINE | re.DOTALL)


@pytest.mark.parametrize("name", ["dda", "shapes", *MODULES])
def test_the_examples_of_docstrings(name):
    result = doctest.testmod(importlib.import_module(name))
    assert result.failed == 0


def test_the_readme_has_two_commands_and_they_name_what_exists():
    run, test = _blocks("sh")
    assert run.count("\n") == test.count("\n") == 1
    study = re.search(r"dda run (\S+)", run)[1]
    assert (ROOT / study).is_file()
    extra = re.search(r"\[(\w+)\]", test)[1]
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    assert extra in project["optional-dependencies"]


def test_the_study_in_the_readme_is_the_shipped_example():
    (shown,) = _blocks("toml")
    example = read_study(ROOT / "dda/study/examples/gold_cube.toml")
    assert study_from_tables(tomllib.loads(shown), Path("x.toml"), shown).tables == example.tables


def test_the_python_in_the_readme_runs(capsys):
    (code,) = _blocks("python")
    exec(compile(code, "README.md", "exec"), {})
    c_ext, c_abs, c_sca = (float(word) for word in capsys.readouterr().out.split())
    # A gold cube of 60 nm near its resonance: an extinction of several times its face, 3600 nm^2.
    assert 5 < c_ext / 3600 < 12
    assert c_ext == pytest.approx(c_abs + c_sca)


def test_links_and_pictures_of_the_documents_exist():
    for document in ("README.md", "DEVELOPERS.md"):
        text = (ROOT / document).read_text(encoding="utf-8")
        for target in re.findall(r"\]\(([^)#:]+)\)", text):
            assert (ROOT / target).exists(), f"{document}: {target}"


def test_every_key_of_a_study_is_in_the_readme():
    from dda.study.schema import (
        AccuracyTable,
        HostTable,
        LightTable,
        ParticleTable,
        SolverTable,
        StudyTables,
    )

    models = (AccuracyTable, HostTable, LightTable, ParticleTable, SolverTable, StudyTables)
    keys = {key for model in models for key in model.model_fields}
    for key in keys - {"method"}:  # there is one method, so nothing to choose
        assert re.search(rf"\b{key}\b", README), key


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_every_shipped_example_is_a_study_of_a_particle(path):
    study = read_study(path)
    particle = build_particle(study.tables.particle, study.folder)
    assert particle.volume() > 0
    low, high = particle.bounds
    assert np.all(np.asarray(high) - np.asarray(low) < 200)  # nm


def test_an_example_runs_at_coarse_cells(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    text = (ROOT / "dda/study/examples/gold_cube.toml").read_text()
    coarse = text.replace("step = 10", "step = 25").replace("cells = 24", "cells = 8")
    assert coarse.count("\n") == text.count("\n")
    Path("cube.toml").write_text(coarse)
    assert main(["run", "cube.toml"]) == 0
    table = np.genfromtxt("cube/spectrum.csv", delimiter=",", names=True, usecols=(0, 1))
    peak = table["wavelength_nm"][table["c_ext_nm2"].argmax()]
    assert 550 <= peak <= 600  # the dipole resonance of a rounded gold cube of this size
