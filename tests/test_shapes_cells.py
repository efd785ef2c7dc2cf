"""What cells say of themselves."""

from dataclasses import replace

import numpy as np
import pytest

import shapes


def test_sizes() -> None:
    cells = shapes.voxelize(shapes.sphere(30), spacing=2.0)
    assert cells.r_eff == pytest.approx(15)
    assert (cells.n, cells.m) == cells.window.shape
    assert np.allclose(cells.extent, 2.0 * np.array(cells.shape))
    assert cells.index.dtype == np.int32
    assert cells.cells_across_thinnest == 15
    order = np.ravel_multi_index(tuple(cells.index.T), cells.shape)
    assert np.all(np.diff(order) > 0)  # C order


def test_dense_and_rows_invert_each_other() -> None:
    cells = shapes.voxelize(shapes.rod(30, 10), spacing=2.0)
    rows = cells.rows()
    assert np.array_equal(rows[tuple(cells.index.T)], np.arange(cells.n))
    box = cells.dense(cells.window[:, 0], empty=-1.0)
    assert np.count_nonzero(box >= 0) == cells.n == np.count_nonzero(rows >= 0)


def test_mirrors_are_read_from_the_cells() -> None:
    cells = shapes.voxelize(shapes.cube(20, 2), spacing=2.0)
    assert cells.mirrors == (True, True, True)
    window = cells.window.copy()
    window[3] += 1e-3
    assert replace(cells, window=window).mirrors == (False, False, False)
    assert replace(cells, normal=-cells.normal).mirrors == (True, True, True)
    fewer = {k: getattr(cells, k)[1:] for k in ("index", "fraction", "window", "normal")}
    fewer["centre_material"] = cells.centre_material[1:]
    assert replace(cells, **fewer).mirrors == (False, False, False)
