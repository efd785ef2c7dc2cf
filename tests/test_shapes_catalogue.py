"""Shapes by name: every entry builds, every mistake is told."""

import doctest
import importlib
import pkgutil

import numpy as np
import pytest

import shapes
from shapes import ShapeError, catalogue

NAMES = sorted(catalogue.entries)
MODULES = sorted(info.name for info in pkgutil.iter_modules(shapes.__path__))


def test_the_catalogue_is_complete() -> None:
    wanted = (
        "sphere ellipsoid cube cuboid rod cylinder disk cone torus prism bipyramid octahedron "
        "tetrahedron icosahedron core_shell multilayer star dimer chain ring bowtie helix frame "
        "aggregate rough_sphere"
    )
    assert set(wanted.split()) <= set(NAMES)


@pytest.mark.parametrize("name", NAMES)
def test_every_example_becomes_cells_of_its_volume(name: str) -> None:
    particle = catalogue.example(name)
    cells = shapes.voxelize(particle, cells=24)
    held = cells.fraction.sum() * cells.spacing**3
    # the spheres of the aggregate are but two cells across
    assert held == pytest.approx(particle.volume(), rel=2e-3 if name == "aggregate" else 1e-3)
    low, high = particle.bounds
    assert np.all(cells.origin - cells.spacing / 2 < low + 1e-9)
    assert np.all(cells.origin - cells.spacing / 2 + cells.extent > high - 1e-9)
    assert particle.area() > 0
    if "bounds" in particle.exact:
        assert cells.n > 0


@pytest.mark.parametrize("name", NAMES)
def test_every_parameter_is_described(name: str) -> None:
    entry = catalogue.find(name)
    assert entry.doc
    for parameter in entry.parameters.values():
        assert parameter.doc
        assert parameter.unit in ("nm", "deg", "")
        assert parameter.required == (parameter.default is None)
    assert all(p.name in entry.example for p in entry.parameters.values() if p.required)
    # the same by keyword from Python
    assert getattr(shapes, name) is entry.builder


@pytest.mark.parametrize(
    ("name", "parameters", "where", "message"),
    [
        ("cueb", {}, ("shape",), "did you mean cube"),
        ("zzz", {}, ("shape",), "known are sphere, ellipsoid"),
        ("cube", {"egde": 5}, ("egde",), "did you mean 'edge'"),
        ("cube", {}, ("edge",), "cube needs edge"),
        ("cube", {"edge": -5}, ("edge",), "edge = -5 nm must be > 0"),
        ("cube", {"edge": "big"}, ("edge",), "must be a number"),
        ("cube", {"edge": True}, ("edge",), "must be a number"),
        ("cube", {"edge": float("inf")}, ("edge",), "must be a number"),
        ("cube", {"edge": 10, "rounding": 6}, ("rounding",), "<= edge/2, here 5"),
        ("cuboid", {"sides": [1, 2]}, ("sides",), "three lengths"),
        ("cuboid", {"sides": 3}, ("sides",), "list of numbers"),
        ("cuboid", {"sides": [1, -2, 3]}, ("sides",), "sides = -2"),
        ("rod", {"length": 10, "diameter": 20}, ("length",), ">= diameter, here 20"),
        ("rod", {"length": 30, "diameter": 20, "axis": "X"}, ("axis",), "did you mean 'x'"),
        ("prism", {"sides": 3.5, "edge": 9, "thickness": 3}, ("sides",), "whole number"),
        ("dimer", {"gap": 2, "of": "sphere"}, ("of",), "table that describes a shape"),
        (
            "dimer",
            {"gap": 2, "of": {"shape": "sphere", "diametre": 3}},
            ("of", "diametre"),
            "dimer.of: sphere has no parameter 'diametre'; did you mean 'diameter'",
        ),
        (
            "core_shell",
            {"thickness": 2, "of": {"shape": "dimer", "gap": 2, "of": {"shape": "cub"}}},
            ("of", "of", "shape"),
            "did you mean cube",
        ),
        ("multilayer", {"of": {"shape": "sphere", "diameter": 9}, "thicknesses": [1, 2],
                        "materials": ["gold"]}, ("materials",), "1 names for 2"),
    ],
)  # fmt: skip
def test_mistakes_are_told_with_their_place(
    name: str, parameters: dict, where: tuple[str, ...], message: str
) -> None:
    with pytest.raises(ShapeError) as caught:
        catalogue.build(name, parameters, "gold")
    assert message in str(caught.value)
    assert caught.value.where == where


def test_python_calls_are_checked_alike() -> None:
    with pytest.raises(ShapeError, match="edge = -1 nm must be > 0"):
        shapes.cube(-1)
    with pytest.raises(ShapeError, match="it takes edge, rounding"):
        shapes.cube(edges=3)  # type: ignore[call-arg]
    with pytest.raises(ShapeError, match="must be a particle"):
        shapes.dimer("sphere", 2)  # type: ignore[arg-type]


def test_names_may_be_written_with_hyphen_or_space() -> None:
    assert catalogue.find("core-shell").name == catalogue.find("Core Shell").name == "core_shell"


def test_nested_shapes_take_the_outer_material_unless_they_name_one() -> None:
    inner = {"shape": "sphere", "diameter": 20}
    assert catalogue.build("dimer", {"of": inner, "gap": 3}, "silver").materials == ("silver",)
    coated = catalogue.build(
        "core_shell", {"of": {**inner, "material": "silica"}, "thickness": 3}, "gold"
    )
    assert coated.materials == ("gold", "silica")


@pytest.mark.parametrize("module", MODULES)
def test_docstring_examples_run(module: str) -> None:
    result = doctest.testmod(importlib.import_module(f"shapes.{module}"))
    assert result.failed == 0
