"""Solutions of neighbouring wavelengths: the nearest ones, for the same cells, within bounds."""

import numpy as np

from dda.study.recycling import Recycled


def _p(value, n=10):
    return np.full((n, 3), value, dtype=complex)


def _values(found):
    return [p[0, 0].real for p in found]


def test_the_nearest_come_first_and_there_are_five_of_them():
    kept = Recycled()
    for wavelength in (500, 510, 520, 530, 540, 550, 560):
        kept.keep("key", wavelength, _p(wavelength))
    assert _values(kept.nearest("key", 532)) == [530, 540, 520, 550, 510]
    assert _values(kept.nearest("key", 480)) == [500, 510, 520, 530, 540]
    assert kept.nearest("another lattice", 532) == []


def test_other_cells_begin_anew():
    kept = Recycled()
    kept.only_for("cells")
    kept.keep("key", 500, _p(1))
    kept.only_for("cells")
    assert len(kept.nearest("key", 500)) == 1
    kept.only_for("other cells")
    assert kept.nearest("key", 500) == []


def test_the_oldest_of_the_longest_list_make_room():
    size = _p(0).nbytes
    kept = Recycled(most_bytes=4 * size)
    kept.keep("short", 500, _p(500))
    for wavelength in (500, 510, 520, 530):
        kept.keep("long", wavelength, _p(wavelength))
    assert _values(kept.nearest("long", 500)) == [510, 520, 530]
    assert _values(kept.nearest("short", 500)) == [500]


def test_what_does_not_fit_at_all_is_not_kept():
    kept = Recycled(most_bytes=_p(0).nbytes - 1)
    kept.keep("key", 500, _p(500))
    assert kept.nearest("key", 500) == []
