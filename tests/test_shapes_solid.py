"""Fill of solids: the volume in the samples is the solid's, wherever it lies."""

import numpy as np
import pytest

from shapes import SampleGrid, ShapeError
from shapes.primitives import Capsule, Cuboid, Ellipsoid, Sphere
from shapes.solid import Solid

SOLIDS: list[Solid] = [
    Sphere(20.0),
    Ellipsoid((24.0, 16.0, 12.0)),
    Cuboid((20.0, 14.0, 12.0), 3.0),
    Capsule(24.0, 12.0),
]


def grid_around(solid: Solid, step: float, shift: float = 0.0) -> SampleGrid:
    low, high = solid.bounds
    shape = np.ceil((high - low) / step).astype(int) + 4
    return SampleGrid((low + high) / 2 - step * (shape - 1) / 2 + shift, step, tuple(shape))


@pytest.mark.parametrize("solid", SOLIDS, ids=lambda s: type(s).__name__)
@pytest.mark.parametrize(("angle", "shift"), [(0, 0.0), (0, 0.3), (33, 0.17)])
def test_filled_volume_is_the_solids(solid: Solid, angle: float, shift: float) -> None:
    # third order in the step: 1e-4 with a dozen samples across the thinnest part
    turned = solid.rotated(angle, (1, 2, 3)).moved((shift, -shift, 2 * shift))
    filled = turned.fill(grid_around(turned, 1.0, shift))
    assert filled.dtype == np.float32
    assert filled.sum(dtype=float) == pytest.approx(solid.volume(), rel=3e-4)


def test_fill_is_the_same_sampled_at_once_or_in_pieces() -> None:
    solid = Ellipsoid((24.0, 16.0, 12.0)).rotated(20, (0, 1, 1))
    grid = grid_around(solid, 0.7)
    whole = solid.fill(grid)
    window = (slice(5, 24), slice(3, 16), slice(0, 9))
    assert np.allclose(whole[window], solid.fill(grid.cut(window)), atol=1e-6)


def test_fill_outside_is_nothing_and_inside_is_all() -> None:
    assert Sphere(20.0).fill(SampleGrid((50.0, 0.0, 0.0), 1.0, (4, 4, 4))).max() == 0
    assert Sphere(20.0).fill(SampleGrid((-1.0, -1.0, -1.0), 0.5, (4, 4, 4))).min() == 1


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Sphere(-3.0), "diameter = -3"),
        (lambda: Sphere(float("nan")), "diameter = nan"),
        (lambda: Cuboid((10.0, 4.0, 10.0), 3.0), "half the shortest side, 2"),
        (lambda: Capsule(10.0, 12.0), "at least the diameter"),
        (lambda: Sphere(10.0).scaled(0.0), "factor"),
        (lambda: Sphere(10.0).grown(-5.0), "leaves nothing"),
        (lambda: Sphere(10.0).rotated(20, (0, 0, 0)), "axis"),
        (lambda: Sphere(10.0).moved((0, np.inf, 0)), "finite"),
    ],
)
def test_what_cannot_be_is_refused(make: object, message: str) -> None:
    with pytest.raises(ShapeError, match=message):
        make()  # type: ignore[operator]
