"""Voxel images as particles: the cells of the solid, volumes kept, bad images refused."""

from __future__ import annotations

import numpy as np
import pytest
from PIL import Image

import shapes
from shapes import SampleGrid, ShapeError, from_image
from shapes.image_body import VoxelBody


def ball_image(radius: float, size: int, centre=(0.0, 0.0, 0.0)) -> np.ndarray:
    """Voxels whose centre is less than radius voxels from the centre of the image."""
    x = np.indices((size,) * 3) - (size - 1) / 2 - np.reshape(centre, (3, 1, 1, 1))
    return ((x**2).sum(axis=0) < radius**2).astype(np.uint8)


def samples(particle: shapes.Particle, step: float) -> tuple[list[np.ndarray], SampleGrid]:
    """Fill of each part on one grid around the particle."""
    low, high = particle.bounds
    shape = tuple(int(n) for n in np.ceil((high - low) / step) + 6)
    origin = (low + high) / 2 - step * (np.array(shape) - 1) / 2
    grid = SampleGrid(origin, step, shape)
    return [part.body.fill(grid) for part in particle.parts], grid


def laid_over(fills: list[np.ndarray]) -> list[np.ndarray]:
    """What is left of each part once later ones are laid over it."""
    left: list[np.ndarray] = []
    for fill in fills:
        left = [old * (1 - fill) for old in left] + [fill]
    return left


# --- cells and volumes


@pytest.mark.parametrize(
    ("cells", "voxels_per_cell", "limit"),
    # With voxels as large as cells the image itself is uncertain by about a tenth of a cell.
    [(16, 1, 0.02), (16, 2, 0.01), (16, 4, 0.003), (28, 2, 0.01)],
)
def test_image_of_a_sphere_gives_its_cells(cells, voxels_per_cell, limit):
    """Mean absolute difference of the window fraction over all cells."""
    solid = shapes.sphere(diameter=40)
    across = cells * voxels_per_cell
    particle = from_image(ball_image(across / 2, across + 6), voxel=40 / across)
    mine = shapes.voxelize(particle, spacing=40 / cells)
    theirs = shapes.voxelize(solid, spacing=40 / cells)
    assert mine.mirrors == (True, True, True)

    def by_place(found):
        place = np.round(2 * found.positions / found.spacing).astype(int)
        return dict(zip(map(tuple, place), found.window[:, 0], strict=True))

    one, other = by_place(mine), by_place(theirs)
    places = set(one) | set(other)
    difference = [one.get(place, 0.0) - other.get(place, 0.0) for place in places]
    assert np.abs(difference).mean() < limit


def test_smoothing_beats_the_staircase():
    """Displaced balls, so that the voxels' errors do not repeat by symmetry."""
    centre = (0.31, -0.22, 0.13)
    image = ball_image(12.0, 32, centre)
    errors = []
    for smooth in (0, 1.0):
        (fill,), grid = samples(from_image(image, voxel=1.0, smooth=smooth), 0.5)
        points = np.stack(np.meshgrid(*grid.axes, indexing="ij"), axis=-1) - centre
        exact = np.clip(0.5 + (12.0 - np.linalg.norm(points, axis=-1)) / grid.step, 0, 1)
        errors.append(np.abs(fill - exact).sum())
    assert errors[1] < 0.4 * errors[0]


@pytest.mark.parametrize("step", [0.37, 1.0, 2.9])
@pytest.mark.parametrize("smooth", [0.0, 1.0])
def test_volume_is_kept_at_every_step(step, smooth):
    particle = from_image(ball_image(10.0, 26, (0.2, 0.4, 0.1)), voxel=1.0, smooth=smooth)
    (fill,), grid = samples(particle, step)
    total = float(fill.sum(dtype=float)) * grid.step**3
    # the shift that keeps the volume is found on thirds of a voxel
    assert total == pytest.approx(particle.volume(), rel=3e-3 if smooth else 1e-5)


def test_tilted_plane_comes_out_flat():
    """The staircase of a plane: its surface is off by less than a seventh of a voxel."""
    normal = np.array([2.0, 3.0, 6.0]) / 7.0
    x = np.moveaxis(np.indices((40, 40, 40)) - 19.5, 0, -1)
    half = ((x @ normal < 0.0) & (np.abs(x).max(axis=-1) < 18)).astype(np.uint8)
    (body,) = (part.body for part in from_image(half, voxel=1.0).parts)
    assert isinstance(body, VoxelBody)
    grid = SampleGrid(np.full(3, -4.0), 0.5, (17, 17, 17))
    points = np.stack(np.meshgrid(*grid.axes, indexing="ij"), axis=-1)
    exact = np.clip(0.5 - points @ normal / grid.step, 0, 1)
    difference = body.fill(grid) - exact
    # fill changes by 1 over half a voxel; the image fixes the plane to 1/7 of a voxel only
    assert np.abs(difference).max() < 2 / 7
    assert np.sqrt((difference[(exact > 0) & (exact < 1)] ** 2).mean()) < 0.15


def test_flat_voxels_give_a_round_ball():
    """Voxels 1 x 1 x 2 nm: distances along z come out in nm too."""
    index = np.indices((36, 36, 20)) - np.array([17.5, 17.5, 9.5]).reshape(3, 1, 1, 1)
    image = ((index * np.array([1, 1, 2.0]).reshape(3, 1, 1, 1)) ** 2).sum(axis=0) < 15.0**2
    particle = from_image(image, voxel=(1, 1, 2), materials={1: "gold"})
    low, high = particle.bounds
    np.testing.assert_allclose(high - low, 30.0, atol=2.0)  # a voxel's longest edge
    (fill,), grid = samples(particle, 0.5)
    points = np.stack(np.meshgrid(*grid.axes, indexing="ij"), axis=-1)
    exact = np.clip(0.5 + (15.0 - np.linalg.norm(points, axis=-1)) / grid.step, 0, 1)
    assert np.abs(fill - exact).sum() < 0.03 * exact.sum()


def test_area_of_a_ball():
    particle = from_image(ball_image(16.0, 40, (0.3, 0.1, 0.2)), voxel=1.0)
    assert particle.area() == pytest.approx(4 * np.pi * 16.0**2, rel=0.01)


def test_thin_sheet_and_gap_are_kept():
    image = np.zeros((40, 30, 30), np.uint8)
    image[5:15, 5:25, 5:25] = 1
    image[16:26, 5:25, 5:25] = 1  # a gap of one voxel
    image[33, 5:25, 5:25] = 1  # a sheet of one voxel
    (body,) = (part.body for part in from_image(image, voxel=1.0).parts)
    assert isinstance(body, VoxelBody)
    line = body.fill(SampleGrid([-19.5, 0.0, 0.0], 1.0, (40, 1, 1))).ravel()
    assert line[15] < 0.5 < line[33]
    assert line[14] > 0.5
    assert line[16] > 0.5
    (blurred,) = (part.body for part in from_image(image, voxel=1.0, smooth=2.0).parts)
    assert isinstance(blurred, VoxelBody)
    assert any("too thin" in note for note in blurred.notes)


# --- several materials


def core_and_shell() -> np.ndarray:
    return ball_image(14.0, 36) + ball_image(9.0, 36)


def test_core_and_shell_meet_without_a_gap():
    particle = from_image(core_and_shell(), voxel=1.0, materials={1: "gold", 2: "silica"})
    assert particle.materials == ("gold", "silica")
    fills, grid = samples(particle, 0.5)
    gold, silica = laid_over(fills)
    radius = np.linalg.norm(np.stack(np.meshgrid(*grid.axes, indexing="ij")), axis=0)
    np.testing.assert_allclose((gold + silica)[radius < 13], 1.0, atol=1e-5)
    assert float(silica.sum()) * grid.step**3 == pytest.approx(
        (core_and_shell() == 2).sum(), rel=0.02
    )
    assert particle.volume() == (core_and_shell() > 0).sum()


def test_halves_side_by_side_leave_no_film():
    """Where both halves end, the one below must not shine through at the outer surface."""
    image = ball_image(14.0, 36)
    image[18:] *= 2
    fills, grid = samples(from_image(image, voxel=1.0, materials={1: "a", 2: "b"}), 0.5)
    left, right = laid_over(fills)
    x = grid.axes[0]
    assert left[x > 1.5].max() < 0.01
    assert right[x < -1.5].max() < 0.01
    whole = samples(from_image(image > 0, voxel=1.0), 0.5)[0][0]
    # a few samples at the line where both end and the host begins are off
    assert np.abs(left + right - whole).sum() < 1e-3 * whole.sum()
    assert np.count_nonzero(np.abs(left + right - whole) > 0.05) < 50


def test_host_label_is_left_out():
    particle = from_image(core_and_shell(), voxel=1.0, materials={"1": "gold", "2": None})
    assert particle.materials == ("gold",)
    assert particle.volume() == (core_and_shell() == 1).sum()


# --- fractions


def test_fractions_are_kept_as_they_are():
    rng = np.random.default_rng(5)
    image = np.zeros((9, 8, 7))
    image[1:-1, 1:-1, 1:-1] = rng.uniform(0, 0.9, (7, 6, 5))
    particle = from_image(image, voxel=2.0, materials={1: "silver"})
    assert particle.volume() == pytest.approx(8 * image.sum())
    (body,) = (part.body for part in particle.parts)
    same = body.fill(SampleGrid([-8.0, -7.0, -6.0], 2.0, image.shape))
    np.testing.assert_allclose(same, image, atol=1e-6)
    fine = body.fill(SampleGrid([-8.5, -7.5, -6.5], 1.0, tuple(2 * n for n in image.shape)))
    np.testing.assert_allclose(fine[1::2, ::2, 1::2], image, atol=1e-6)
    # a sample over two by two by two voxels holds their mean
    pairs = image[:8, :8, :6].reshape(4, 2, 4, 2, 3, 2).mean(axis=(1, 3, 5))
    coarse = body.fill(SampleGrid([-7.0, -6.0, -5.0], 4.0, (4, 4, 3)))
    np.testing.assert_allclose(coarse, pairs, atol=1e-6)


def test_grey_image_of_a_ball_gives_its_cells():
    fine = ball_image(40.0, 96).reshape(24, 4, 24, 4, 24, 4).mean(axis=(1, 3, 5))
    mine = shapes.voxelize(from_image(fine, voxel=2.0).centred(), spacing=2.5)
    theirs = shapes.voxelize(shapes.sphere(diameter=40), spacing=2.5)
    total = theirs.window.sum()
    # the voxels' edges blur the surface by a third of a voxel, but where it is they keep
    assert mine.window.sum() == pytest.approx(total, rel=0.005)
    assert mine.fraction.sum() == pytest.approx(theirs.fraction.sum(), rel=0.005)


# --- moves


def test_moved_rotated_mirrored_scaled():
    image = np.zeros((30, 30, 30), np.uint8)
    image[5:25, 8:20, 6:12] = 1
    image[5:10, 8:12, 12:20] = 1
    (body,) = (part.body for part in from_image(image, voxel=1.0).parts)
    assert isinstance(body, VoxelBody)
    grid = SampleGrid(np.full(3, -19.5), 1.0, (40, 40, 40))
    plain = body.fill(grid)
    quarter = body.rotated(90, (0, 0, 1)).fill(grid)
    np.testing.assert_allclose(quarter, np.rot90(plain, axes=(0, 1)), atol=1e-5)
    np.testing.assert_allclose(body.mirrored(1).fill(grid), plain[:, ::-1], atol=1e-5)
    np.testing.assert_allclose(body.moved((3, 0, 0)).fill(grid)[3:], plain[:-3], atol=1e-5)
    double = SampleGrid(np.full(3, -39.0), 2.0, (40, 40, 40))
    np.testing.assert_allclose(body.scaled(2.0).fill(double), plain, atol=1e-5)
    assert body.scaled(2.0).volume() == 8 * body.volume()
    tilted = body.rotated(31, (1, 2, 3))
    fine = SampleGrid(np.full(3, -24.75), 0.5, (100, 100, 100))
    assert tilted.fill(fine).sum() / 8 == pytest.approx(body.volume(), rel=5e-3)
    assert body.mirrors() == (False, False, False)
    assert tilted.mirrors() == (False, False, False)


def test_mirrors_follow_quarter_turns():
    image = np.zeros((20, 24, 28), np.uint8)
    image[4:16, 5:19, 6:22] = 1
    image[4:8, 5:19, 22:24] = 1  # symmetric in y only
    (body,) = (part.body for part in from_image(image, voxel=1.0).parts)
    assert isinstance(body, VoxelBody)
    assert body.mirrors() == (False, True, False)
    assert body.rotated(90, (0, 0, 1)).mirrors() == (True, False, False)


# --- files


def write_stack(path, image: np.ndarray) -> None:
    """TIFF with one frame per z, rows along y, columns along x."""
    frames = [
        Image.fromarray(np.ascontiguousarray(image[:, :, z].T)) for z in range(image.shape[2])
    ]
    frames[0].save(path, save_all=True, append_images=frames[1:])


@pytest.mark.parametrize("kind", [np.uint8, np.uint16, np.float32])
def test_files_hold_the_same_particle(kind, tmp_path):
    image = np.zeros((12, 14, 16), kind)
    image[2:9, 3:12, 4:7] = 1
    image[2:4, 3:6, 7:13] = 1
    np.save(tmp_path / "it.npy", image)
    write_stack(tmp_path / "it.tif", image)
    whole = from_image(image, voxel=1.0)
    for name in ("it.npy", "it.tif"):
        read = from_image(tmp_path / name, voxel=1.0)
        np.testing.assert_allclose(read.bounds, whole.bounds)
        np.testing.assert_array_equal(read.parts[0].body.values, whole.parts[0].body.values)


def test_bad_files_are_refused(tmp_path):
    with pytest.raises(ShapeError, match="no image file"):
        from_image(tmp_path / "absent.npy", voxel=1.0)
    (tmp_path / "it.mrc").write_bytes(b"0")
    with pytest.raises(ShapeError, match=r"\.npy, \.tif, \.tiff"):
        from_image(tmp_path / "it.mrc", voxel=1.0)
    for name in ("bad.npy", "bad.tif"):
        (tmp_path / name).write_bytes(b"nothing of the kind")
        with pytest.raises(ShapeError, match="cannot be read as"):
            from_image(tmp_path / name, voxel=1.0)
    Image.new("RGB", (8, 8)).save(tmp_path / "colour.tif")
    with pytest.raises(ShapeError, match="no colours"):
        from_image(tmp_path / "colour.tif", voxel=1.0)


# --- refusals


def with_value(value, kind=float) -> np.ndarray:
    image = ball_image(4.0, 12).astype(kind)
    image[3, 4, 5] = value
    return image


@pytest.mark.parametrize(
    ("image", "options", "words"),
    [
        (np.ones((5, 5), int), {}, "has 2 dimensions"),
        (np.zeros((5, 5, 5), int), {}, "is empty"),
        (np.zeros((0, 5, 5)), {}, "holds no numbers"),
        (with_value(np.nan), {}, r"1 voxels are not finite.*\(3, 4, 5\)"),
        (with_value(-2, int), {}, r"1 voxels are negative.*\(3, 4, 5\)"),
        (with_value(3.5), {}, "grey values reach 3.5"),
        (with_value(7, int), {}, "no material for labels 1, 7"),
        (with_value(7, int), {"materials": {1: "gold"}}, "no material for label 7"),
        (with_value(1, int), {"materials": {1: "a", 2: "b"}}, "has no label 2; it has label 1"),
        (with_value(1, int), {"materials": {0: "a", 1: "b"}}, "0 is the host"),
        (with_value(1, int), {"materials": {"one": "a"}}, "'one' is not a whole number"),
        (with_value(1, int), {"materials": {1: None}}, "no particle is left"),
        (with_value(0.5), {"materials": {1: "a", 2: "b"}}, "one material"),
        (with_value(1, int), {"voxel": 0.0}, "greater than 0"),
        (with_value(1, int), {"voxel": (1.0, 2.0)}, "one edge or three"),
        (with_value(1, int), {"voxel": 1e-9}, "voxel is the edge of one voxel in nm"),
        (with_value(1, int), {"smooth": 0.3}, "smooth"),
        (np.arange(27).reshape(3, 3, 3), {}, "scale them to fractions"),
    ],
)
def test_bad_images_are_refused(image, options, words):
    with pytest.raises(ShapeError, match=words):
        from_image(image, **{"voxel": 1.0, **options})


def test_particle_at_the_border_is_noted():
    particle = from_image(ball_image(8.0, 20, (5.0, 0, 0)), voxel=1.0)
    (body,) = (part.body for part in particle.parts)
    assert isinstance(body, VoxelBody)
    assert any("image border (x high)" in note for note in body.notes)
    assert particle.bounds[1][0] == pytest.approx(10.0, abs=0.3)  # closed at the border
