"""The one call for a tumbling particle."""

import numpy as np
import pytest

import dda
import shapes
from dda.response.orientation import tumbling


def rod():
    return dda.system(shapes.voxelize(shapes.rod(50, 20), cells=8), 600.0, 1.33)


def test_both_ways_by_name():
    one, two = tumbling(rod()), tumbling(rod(), way="quadrature")
    assert (one.average.way, two.average.way) == ("t-matrix", "quadrature")
    assert two.t_matrix is None
    assert one.t_matrix is not None
    assert np.isclose(one.average.c_ext, two.average.c_ext, rtol=2e-3)
    assert one.average.order == one.t_matrix.order


def test_order_and_progress_are_handed_on():
    seen = []
    result = tumbling(rod(), order=3, monitor=lambda done, of: seen.append((done, of)))
    assert result.t_matrix.order == 3
    assert seen[-1][0] == seen[-1][1] == len(seen)


def test_unknown_ways_are_refused():
    with pytest.raises(dda.InputError, match="t-matrix or quadrature"):
        tumbling(rod(), way="guess")
