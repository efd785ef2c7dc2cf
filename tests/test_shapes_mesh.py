"""Meshes as particles: exact sizes, the cells of the solid, damage repaired or refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import trimesh
from hypothesis import given, settings
from hypothesis import strategies as st

import shapes
from shapes import SampleGrid, ShapeError, from_mesh
from shapes.mesh import MeshBody, body_from_triangles
from shapes.mesh_distance import signed_distance, triangle_tree, winding_at
from shapes.mesh_fill import nearest_offset, winding_numbers
from validation.make_star import STAR

ROUNDING = 1e-6  # a binary STL holds 24 bits of each coordinate


def ball(radius: float = 20.0, subdivisions: int = 3) -> trimesh.Trimesh:
    return trimesh.creation.icosphere(subdivisions=subdivisions, radius=radius)


def raw(vertices, faces) -> trimesh.Trimesh:
    """A mesh that trimesh does not tidy up."""
    return trimesh.Trimesh(vertices, faces, process=False)


def load(mesh: trimesh.Trimesh, folder: Path, kind: str = "stl", **options) -> MeshBody:
    path = folder / f"it.{kind}"
    mesh.export(path)
    body = from_mesh(path, **options).parts[0].body
    assert isinstance(body, MeshBody)
    return body


def said(body: MeshBody, *words: str) -> bool:
    return any(all(word in note for word in words) for note in body.notes)


# --- formats and units


@pytest.mark.parametrize("kind", ["stl", "obj", "ply", "glb"])
def test_each_format_gives_the_same_body(kind, tmp_path):
    mesh = trimesh.creation.torus(major_radius=20, minor_radius=6)
    body = load(mesh, tmp_path, kind)
    assert body.volume() == pytest.approx(mesh.volume, rel=ROUNDING)
    assert body.area() == pytest.approx(mesh.area, rel=ROUNDING)
    np.testing.assert_allclose(body.bounds, mesh.bounds, atol=1e-4)


def test_3mf(tmp_path):
    body = load(ball(), tmp_path, "3mf")
    assert body.volume() == pytest.approx(ball().volume, rel=ROUNDING)


def test_ascii_stl_equals_binary_stl(tmp_path):
    mesh = ball()
    (tmp_path / "text.stl").write_text(mesh.export(file_type="stl_ascii"))
    text = from_mesh(tmp_path / "text.stl")
    assert text.volume() == pytest.approx(load(mesh, tmp_path).volume(), rel=1e-5)


def test_unit_and_scale_change_the_size(tmp_path):
    body = load(raw(ball().vertices * 1e-9, ball().faces), tmp_path, "ply", unit="m", scale=2.0)
    assert body.volume() == pytest.approx(8 * ball().volume, rel=1e-5)
    assert said(body, "size 80 x 80 x 80 nm")


@pytest.mark.parametrize(
    ("factor", "unit", "hint"), [(1e-9, "nm", "unit = 'm'"), (1.0, "mm", "'nm'")]
)
def test_absurd_size_names_the_unit(factor, unit, hint, tmp_path):
    with pytest.raises(ShapeError, match="the unit or the scale is wrong") as caught:
        load(raw(ball().vertices * factor, ball().faces), tmp_path, "ply", unit=unit)
    assert hint in str(caught.value)


def test_unknown_unit_and_format_list_the_known(tmp_path):
    with pytest.raises(ShapeError, match="angstrom, nm, um"):
        load(ball(), tmp_path, unit="furlong")
    (tmp_path / "it.step").write_text("ISO-10303-21;")
    with pytest.raises(ShapeError, match=r"\.stl, \.obj, \.ply, \.3mf, \.glb"):
        from_mesh(tmp_path / "it.step")
    with pytest.raises(ShapeError, match="no mesh file"):
        from_mesh(tmp_path / "absent.stl")


@pytest.mark.parametrize("content", [b"", b"solid a\nendsolid a\n", b"not a mesh at all" * 20])
def test_files_without_triangles_are_refused(content, tmp_path):
    (tmp_path / "it.stl").write_bytes(content)
    with pytest.raises(ShapeError, match="no triangles"):
        from_mesh(tmp_path / "it.stl")


# --- damage


def test_inverted_normals_are_turned(tmp_path):
    mesh = ball()
    body = load(raw(mesh.vertices, mesh.faces[:, ::-1]), tmp_path)
    assert body.volume() == pytest.approx(mesh.volume, rel=ROUNDING)
    assert said(body, "turned all triangles")


def test_some_inverted_normals_are_turned(tmp_path):
    mesh = ball()
    faces = mesh.faces.copy()
    faces[100:400] = faces[100:400, ::-1]
    body = load(raw(mesh.vertices, faces), tmp_path)
    assert body.volume() == pytest.approx(mesh.volume, rel=ROUNDING)
    assert said(body, "turned 300 of 1280 triangles")


def test_duplicate_and_degenerate_triangles_are_removed(tmp_path):
    mesh = ball()
    bad = np.concatenate([mesh.faces, mesh.faces[7:17], mesh.faces[3:5, ::-1], [[1, 1, 2]]])
    body = load(raw(mesh.vertices, bad), tmp_path)
    assert body.volume() == pytest.approx(mesh.volume, rel=ROUNDING)
    assert len(body.faces) == len(mesh.faces)
    assert said(body, "12 duplicate")
    assert said(body, "1 degenerate")


def test_repair_can_be_switched_off(tmp_path):
    mesh = ball()
    with pytest.raises(ShapeError, match=r"1 duplicate triangle.*repair is off"):
        load(raw(mesh.vertices, np.vstack([mesh.faces, mesh.faces[:1]])), tmp_path, repair=False)


def test_split_corners_are_welded(tmp_path):
    mesh = ball()
    rng = np.random.default_rng(3)
    soup = mesh.triangles.reshape(-1, 3) + rng.uniform(-1e-5, 1e-5, (3 * len(mesh.faces), 3))
    body = load(raw(soup, np.arange(len(soup)).reshape(-1, 3)), tmp_path, "ply")
    assert body.volume() == pytest.approx(mesh.volume, rel=1e-5)
    assert said(body, "welded")


def test_small_holes_are_closed(tmp_path):
    mesh = ball()
    around = np.flatnonzero((mesh.faces == 5).any(axis=1))
    keep = np.setdiff1d(np.arange(len(mesh.faces)), [*around, 700])
    body = load(raw(mesh.vertices, mesh.faces[keep]), tmp_path)
    assert said(body, "closed 2 holes")
    # the cap over five or six triangles is flat: it cuts off a cap 0.13 nm high
    assert body.volume() == pytest.approx(mesh.volume, rel=1e-3)


def test_open_mesh_is_refused_with_number_and_place(tmp_path):
    mesh = ball()
    keep = mesh.triangles_center[:, 2] < 17
    with pytest.raises(ShapeError, match="24 open edges around 1 hole") as caught:
        load(raw(mesh.vertices, mesh.faces[keep]), tmp_path)
    assert "(0, 0, 17.1" in str(caught.value)


def test_stray_triangle_is_dropped_and_fin_refused(tmp_path):
    mesh = ball()
    vertices = np.vstack([mesh.vertices, [[40.0, 0, 0], [40, 5, 0], [40, 0, 5]]])
    n = len(mesh.vertices)
    stray = load(raw(vertices, np.vstack([mesh.faces, [[n, n + 1, n + 2]]])), tmp_path)
    assert said(stray, "1 stray triangle")
    assert stray.bounds[1][0] == pytest.approx(20.0, abs=1e-5)
    a, b = mesh.edges_unique[0]
    with pytest.raises(ShapeError, match="branches at 1 edge"):
        load(raw(vertices, np.vstack([mesh.faces, [[a, b, n]]])), tmp_path)


def test_one_sided_surface_is_refused():
    turns = np.linspace(0, 2 * np.pi, 60, endpoint=False)
    half = 4 * np.stack(
        [np.cos(turns / 2) * np.cos(turns), np.cos(turns / 2) * np.sin(turns), np.sin(turns / 2)], 1
    )
    middle = 20 * np.stack([np.cos(turns), np.sin(turns), 0 * turns], 1)
    vertices = np.concatenate([middle - half, middle + half])
    faces = []
    for n in range(60):
        a, b = n, n + 60
        c, d = (n + 1, n + 61) if n < 59 else (60, 0)  # the band closes after half a turn
        faces += [[a, c, b], [b, c, d]]
    with pytest.raises(ShapeError, match="one-sided"):
        body_from_triangles(vertices, faces)


def test_zero_volume_is_refused(tmp_path):
    flat = ball().vertices * [1, 1, 0]
    with pytest.raises(ShapeError, match="zero volume"):
        load(raw(flat, ball().faces), tmp_path)
    sheet = trimesh.creation.box((30, 30, 1e-8))
    with pytest.raises(ShapeError, match="zero volume"):
        load(sheet, tmp_path, "ply")


def test_nan_is_refused_with_its_place():
    vertices = ball().vertices.copy()
    vertices[17, 1] = np.nan
    with pytest.raises(ShapeError, match=r"1 of 642 corners.*corner 17"):
        body_from_triangles(vertices, ball().faces)


def test_surface_through_itself_is_refused_with_its_place():
    mesh = ball(subdivisions=4)
    vertices = mesh.vertices.copy()
    top = vertices[:, 2] > 15
    vertices[top, 2] -= 50.0  # the cap comes out at the bottom
    with pytest.raises(ShapeError, match=r"passes through itself: .* around \(.*, .*, -2.*\) nm"):
        body_from_triangles(vertices, mesh.faces)


# --- several bodies


def test_two_bodies_are_one_particle(tmp_path):
    other = ball(10).apply_translation((40, 0, 0))
    body = load(trimesh.util.concatenate([ball(), other]), tmp_path)
    assert body.volume() == pytest.approx(ball().volume + other.volume, rel=ROUNDING)
    assert said(body, "2 bodies")


def test_inverted_second_body_is_turned(tmp_path):
    other = ball(10).apply_translation((40, 0, 0))
    other.invert()
    body = load(trimesh.util.concatenate([ball(), other]), tmp_path)
    assert body.volume() == pytest.approx(ball().volume - other.volume, rel=ROUNDING)
    assert said(body, "turned 1280 triangles")


@pytest.mark.parametrize("inverted", [False, True])
def test_cavity_stays_empty(inverted, tmp_path):
    cavity = ball(10)
    cavity.invert()
    hollow = trimesh.util.concatenate([ball(), cavity])
    if inverted:
        hollow.invert()
    body = load(hollow, tmp_path)
    assert body.volume() == pytest.approx(ball().volume + cavity.volume, rel=ROUNDING)
    assert said(body, "1 cavity")
    assert body.fill(SampleGrid(np.zeros(3), 1.0, (1, 1, 1)))[0, 0, 0] == 0.0


def test_overlap_counts_once(tmp_path):
    other = ball(subdivisions=4).apply_translation((25, 0, 0))
    body = load(trimesh.util.concatenate([ball(subdivisions=4), other]), tmp_path)
    assert said(body, "bodies overlap")
    # lens of two equal balls of radius r at distance d: pi (4 r + d)(2 r - d)^2 / 12
    exact = 2 * 4 / 3 * np.pi * 20**3 - np.pi * (80 + 25) * (40 - 25) ** 2 / 12
    assert body.volume() == pytest.approx(exact, rel=5e-3)  # the balls have 5120 flat faces
    middle = body.fill(SampleGrid(np.array([12.5, 0, 0]) - 2, 1.0, (5, 5, 5)))
    assert middle.min() == 1.0  # no trace of the surfaces inside


def test_touching_boxes_have_no_gap(tmp_path):
    right = trimesh.creation.box((20, 20, 20)).apply_translation((20, 0, 0))
    body = load(
        trimesh.util.concatenate([trimesh.creation.box((20, 20, 20)), right.subdivide()]), tmp_path
    )
    middle = body.fill(SampleGrid(np.array([9.3, -2, -2]), 0.5, (4, 8, 8)))
    np.testing.assert_allclose(middle, 1.0, atol=1e-6)


def test_shared_wall_goes(tmp_path):
    box = trimesh.creation.box((20, 20, 20))
    mirrored = raw(box.vertices * [-1, 1, 1] + [20, 0, 0], box.faces[:, ::-1])
    body = load(trimesh.util.concatenate([box, mirrored]), tmp_path)
    assert said(body, "2 inner wall")
    assert body.area() == pytest.approx(4000, rel=ROUNDING)


# --- samples


def grid_around(body: MeshBody, samples: int, shift=(0.0, 0.0, 0.0)) -> SampleGrid:
    low, high = body.bounds
    step = float((high - low).max()) / samples
    shape = tuple(int(n) for n in np.ceil((high - low) / step) + 3)
    return SampleGrid(low - step * (0.5 + np.array(shift)), step, shape)


@settings(max_examples=15, deadline=None)
@given(
    angle=st.floats(0, 360),
    shift=st.tuples(*[st.floats(0, 1)] * 3),
    edges=st.tuples(*[st.floats(10, 40)] * 3),
)
def test_volume_of_samples_over_offsets_and_rotations(angle, shift, edges):
    box = trimesh.creation.box(edges)
    body = body_from_triangles(box.vertices, box.faces).rotated(angle, (1, 2, 3))
    grid = grid_around(body, 96, shift)
    total = float(body.fill(grid).sum(dtype=float)) * grid.step**3
    # faces are exact; only samples at edges, 1/96 of the size wide, are off
    assert total == pytest.approx(np.prod(edges), rel=1e-3)
    assert body.volume() == pytest.approx(np.prod(edges), rel=1e-9)


def test_columns_through_edges_and_corners_are_consistent():
    """Corners, edges and faces of this mesh lie exactly on the samples."""
    box = trimesh.creation.box((8, 8, 8)).subdivide().subdivide()
    numbers = winding_numbers(box.triangles + 6.0, (13, 13, 13))
    assert set(np.unique(numbers)) == {0, 1}
    assert numbers[3:10, 3:10, 3:10].min() == 1
    outside = numbers.copy()
    outside[2:11, 2:11, 2:11] = 0
    assert outside.max() == 0


def test_fill_is_the_part_of_the_sample_inside():
    """Against 12^3 points in each sample near the surface, of a ball and of a turned box."""
    box = trimesh.creation.box((30, 20, 10))
    turned = body_from_triangles(box.vertices, box.faces).rotated(40, (1, 2, 3))
    for body in (body_from_triangles(ball().vertices, ball().faces), turned):
        grid = grid_around(body, 24, (0.3, 0.1, 0.7))
        filled = body.fill(grid)
        some = np.argwhere((filled > 0) & (filled < 1))[::7]
        inner = (np.stack(np.indices((12, 12, 12)), axis=-1).reshape(-1, 3) + 0.5) / 12 - 0.5
        points = grid.origin + grid.step * (some[:, None] + inner)
        tree = triangle_tree(body.vertices[body.faces])
        counted = winding_at(tree, points.reshape(-1, 3)).reshape(len(some), -1).mean(axis=1)
        difference = filled[tuple(some.T)] - counted
        # counting is good to about 1/24; beyond that only samples on the box's edges are off
        assert np.mean(np.abs(difference) > 0.05) < 0.2
        assert np.abs(difference).mean() < 0.02
        assert abs(difference.mean()) < 0.015  # sharp edges are overfilled


def test_slabs_equal_the_whole():
    body = body_from_triangles(ball().vertices, ball().faces)
    grid = grid_around(body, 40)
    whole = body.fill(grid)
    nx, ny, nz = grid.shape
    for start in range(0, nx, 5):
        cut = (slice(start, min(nx, start + 5)), slice(0, ny), slice(0, nz))
        np.testing.assert_allclose(body.fill(grid.cut(cut)), whole[cut], atol=1e-6)


def test_distance_tree_equals_every_triangle():
    mesh = ball(subdivisions=2)
    points = np.random.default_rng(0).uniform(-30, 30, (40, 3))
    tree = triangle_tree(mesh.triangles)
    offsets = [[nearest_offset(t, *p) for t in mesh.triangles] for p in points]
    slow = np.linalg.norm(offsets, axis=2).min(axis=1)
    np.testing.assert_allclose(np.abs(signed_distance(tree, points)), slow, rtol=1e-12)
    inside = np.linalg.norm(points, axis=1) < 19
    outside = np.linalg.norm(points, axis=1) > 20
    assert (winding_at(tree, points)[inside] == 1).all()
    assert (winding_at(tree, points)[outside] == 0).all()


def test_needles_and_long_triangles_are_sampled_everywhere():
    """The rows of a triangle much larger than its box's share take another path."""
    thin = trimesh.creation.box((60, 1.2, 0.9))
    body = body_from_triangles(thin.vertices, thin.faces).rotated(37, (1, 1, 2))
    grid = grid_around(body, 160)
    points = np.stack(np.meshgrid(*grid.axes, indexing="ij"), axis=-1).reshape(-1, 3)
    ramp = np.clip(0.5 + body.signed_distance(points) / grid.step, 0, 1).reshape(grid.shape)
    # ramp and plane differ by 0.17 at most, a missed triangle would make it 0.5
    assert np.abs(body.fill(grid) - ramp).max() < 0.2
    total = float(body.fill(grid).sum(dtype=float)) * grid.step**3
    assert total == pytest.approx(body.volume(), rel=0.05)  # three samples thick


def test_mirrors_are_found_to_a_tolerance():
    mesh = ball()
    assert body_from_triangles(mesh.vertices, mesh.faces).mirrors() == (True, True, True)
    dented = mesh.vertices.copy()
    dented[dented[:, 0].argmax()] *= 0.97
    assert body_from_triangles(dented, mesh.faces).mirrors() == (False, True, True)
    # another triangulation of the same planes is still symmetric
    box = trimesh.creation.box((20, 30, 40)).subdivide_to_size(9.7)
    assert body_from_triangles(box.vertices, box.faces).mirrors() == (True, True, True)


def test_moved_rotated_mirrored_scaled():
    star = from_mesh(STAR).parts[0].body
    assert isinstance(star, MeshBody)
    changed = star.moved((5, 6, 7)).rotated(33, (1, 0, 2)).mirrored(1).scaled(2.0)
    assert changed.volume() == pytest.approx(8 * star.volume(), rel=1e-9)
    assert changed.area() == pytest.approx(4 * star.area(), rel=1e-9)
    inside = changed.signed_distance(changed.vertices.mean(axis=0, keepdims=True))
    centre = star.signed_distance(star.vertices.mean(axis=0, keepdims=True))
    np.testing.assert_allclose(inside, 2 * centre, rtol=1e-9)


def test_shipped_star_is_sound():
    particle = from_mesh(STAR)
    body = particle.parts[0].body
    assert isinstance(body, MeshBody)
    assert len(body.notes) == 1  # the size, nothing repaired
    tips = np.linalg.norm(body.vertices[:, None] - body.vertices[None], axis=-1).max()
    assert 65 < tips < 75
    assert STAR.stat().st_size < 300_000


# --- cells


@pytest.mark.parametrize("cells", [12, 20])
def test_mesh_gives_the_cells_of_the_solid(cells):
    """Mean absolute difference of the window fraction over all cells, below 0.01."""
    solid = shapes.sphere(diameter=40)
    mesh = ball(subdivisions=6)
    body = body_from_triangles(mesh.vertices, mesh.faces)
    particle = shapes.Particle((shapes.Part(body, "gold"),))
    mine = shapes.voxelize(particle, spacing=40 / cells)
    theirs = shapes.voxelize(solid, spacing=40 / cells)
    assert mine.n == theirs.n
    assert mine.mirrors == theirs.mirrors == (True, True, True)
    # the mesh of 81,920 triangles lies within 0.002 nm of the sphere: far below the 1 % asked for
    assert np.abs(mine.window - theirs.window).mean() < 5e-4
    assert np.abs(mine.fraction - theirs.fraction).max() < 5e-3
    inner = np.einsum("ij,ij->i", mine.normal, theirs.normal)
    assert inner[np.any(theirs.normal != 0, axis=1)].min() > 0.999


def test_a_cube_gives_the_cells_of_the_solid():
    solid = shapes.cuboid(sides=(30, 20, 16), rounding=0)
    box = trimesh.creation.box((30, 20, 16))
    particle = shapes.Particle((shapes.Part(body_from_triangles(box.vertices, box.faces), "gold"),))
    mine, theirs = (shapes.voxelize(p, spacing=1.7) for p in (particle, solid))
    assert mine.shape == theirs.shape
    # along the edges a window may fall on either side of what counts as occupied, 0.5 % of it
    mine_alone = (mine.rows() >= 0) & (theirs.rows() < 0)
    theirs_alone = (theirs.rows() >= 0) & (mine.rows() < 0)
    assert mine.dense(mine.window)[mine_alone].max(initial=0) < 0.01
    assert theirs.dense(theirs.window)[theirs_alone].max(initial=0) < 0.01
    both = (mine.rows() >= 0) & (theirs.rows() >= 0)
    difference = (mine.dense(mine.window) - theirs.dense(theirs.window))[both]
    # faces agree; samples cut by a sharp edge are taken as cut by one plane, up to 0.5 % of a cell
    assert np.abs(difference).max() < 5e-3
    assert np.abs(difference).mean() < 1e-3
