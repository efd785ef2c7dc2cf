"""Particles assembled from placed, turned and subtracted parts."""

import numpy as np
import pytest

import shapes
from shapes import ShapeError, assemble, build_parts, placed


def test_placing_turns_first_and_moves_then() -> None:
    rod = placed(shapes.rod(60, 20), (10, 0, 0), {"angle": 90, "axis": [0, 0, 1]})
    low, high = rod.bounds
    assert np.allclose(low, [0, -30, -10])
    assert np.allclose(high, [20, 30, 10])


def test_parts_cover_and_remove() -> None:
    particle = build_parts(
        [
            {"shape": "cube", "edge": 40, "material": "silver"},
            {"shape": "sphere", "diameter": 20, "material": "gold", "position": [20, 0, 0]},
            {"shape": "sphere", "diameter": 16, "subtract": True, "position": [-20, 0, 0]},
        ]
    )
    assert particle.materials == ("silver", "gold")
    ball, bite = np.pi / 6 * 20**3, np.pi / 6 * 16**3
    assert particle.volume() == pytest.approx(40**3 + ball / 2 - bite / 2, rel=1e-3)
    cells = shapes.voxelize(particle, spacing=1.25)
    held = cells.fraction.sum(axis=0) * cells.spacing**3
    assert held[1] == pytest.approx(ball, rel=5e-3)
    assert held.sum() == pytest.approx(particle.volume(), rel=2e-3)


def test_gap_and_thinnest_of_the_pieces_are_kept() -> None:
    both = assemble([shapes.dimer(shapes.sphere(20), gap=2), shapes.disk(100, 5)])
    assert both.gap == 2
    assert both.thinnest == 5


@pytest.mark.parametrize(
    ("tables", "where", "message"),
    [
        ([], (), "first part must add"),
        ([{"edge": 3}], ("0", "shape"), "part 1: the key 'shape' is missing"),
        ([{"shape": "cube", "edge": 3}], ("0", "material"), "'material' is missing"),
        (
            [{"shape": "cube", "edge": 3, "material": "gold"}, {"shape": "cube"}],
            ("1", "material"),
            "part 2",
        ),
        (
            [{"shape": "cube", "edge": 3, "material": "gold", "position": [1, 2]}],
            ("0", "position"),
            "3 numbers",
        ),
        (
            [{"shape": "cube", "edge": 3, "material": "gold", "rotation": 90}],
            ("0", "rotation"),
            "'angle'",
        ),
        (
            [{"shape": "cube", "edge": 3, "material": "gold", "rotation": {"angle": "a"}}],
            ("0", "rotation", "angle"),
            "a number",
        ),
        ([{"shape": "cube", "edge": 3, "subtract": True}], (), "nothing to subtract from"),
        ([{"shape": "cube", "edge": 3, "subtract": 1}], ("0", "subtract"), "true or false"),
    ],
)
def test_mistakes_name_the_part(tables: list, where: tuple, message: str) -> None:
    with pytest.raises(ShapeError) as caught:
        build_parts(tables)
    assert message in str(caught.value)
    assert caught.value.where == where
