"""A point's file is whole or absent, says what it holds, and is known by its checksum."""

import hashlib
import os

import h5py
import numpy as np
import pytest

from dda.accuracy import Level
from dda.errors import ComputationError
from dda.study.more import Array
from dda.study.point_file import copy_point, damaged, place_of, read_point, write_point

IDENTITY = "0123456789abcdef" * 2


def _level(spacing):
    return Level(
        spacing=spacing,
        sections=(3.0 / spacing, 2.0, 1.0),
        solver_error=(0.1, 0.2, float("nan")),
        cells=512,
        iterations=10,
        products=22,
        residual=1e-3,
        status="converged",
        seconds=0.5,
    )


LEVELS = (_level(4.0), _level(2.0))


def test_levels_and_arrays_come_back_with_units(tmp_path):
    large = np.arange(4000, dtype=complex).reshape(2, 2000) * (1 + 2j)
    arrays = [
        Array("t_matrix/values", large, "", "order by order"),
        Array("s", np.eye(2), "nm", ""),
    ]
    about = {"study": "cubes", "wavelength_nm": 520.0, "varied": {"particle.edge": [1, 2]}}
    name, checksum = write_point(tmp_path, IDENTITY, about, LEVELS, arrays)
    assert name == place_of(IDENTITY) == f"points/01/{IDENTITY}.h5"
    found = read_point(tmp_path / name)
    np.testing.assert_array_equal(found["levels/spacing"], [4.0, 2.0])
    np.testing.assert_array_equal(found["levels/c_ext"], [0.75, 1.5])
    assert np.isnan(found["levels/c_sca_solver_error"]).all()
    np.testing.assert_array_equal(found["t_matrix/values"], large)
    with h5py.File(tmp_path / name) as file:
        assert file.attrs["identity"] == IDENTITY
        assert file.attrs["varied"] == '{"particle.edge": [1, 2]}'
        assert file["levels/c_ext"].attrs["unit"] == "nm^2"
        assert file["levels/spacing"].attrs["unit"] == "nm"
        assert file["levels/seconds"].attrs["unit"] == "s"
        assert file["levels/iterations"].attrs["unit"] == ""
        assert file["s"].attrs["unit"] == "nm"
    assert hashlib.sha256((tmp_path / name).read_bytes()).hexdigest() == checksum
    assert damaged(tmp_path, [(IDENTITY, name, checksum)]) == []


def _change(path):
    content = bytearray(path.read_bytes())
    content[len(content) // 2] ^= 1
    path.write_bytes(content)


@pytest.mark.parametrize(
    ("harm", "said"),
    [
        (_change, "changed since it was written"),
        (lambda path: path.write_bytes(path.read_bytes()[:-1]), "changed since it was written"),
        (lambda path: path.write_bytes(b""), "changed since it was written"),
        (lambda path: path.unlink(), "missing"),
        (lambda path: (path.unlink(), path.mkdir()), "cannot be read (Is a directory)"),
    ],
)
def test_what_happened_to_a_file_is_found(tmp_path, harm, said):
    name, checksum = write_point(tmp_path, IDENTITY, {}, LEVELS, [])
    harm(tmp_path / name)
    assert damaged(tmp_path, [(IDENTITY, name, checksum)]) == [(IDENTITY, name, said)]


def test_nothing_half_is_left_when_writing_fails(tmp_path, monkeypatch):
    name, checksum = write_point(tmp_path, IDENTITY, {}, LEVELS, [])

    def broken(*_):
        raise OSError(5, "Input/output error")

    for call in ("fsync", "replace"):
        monkeypatch.setattr(os, call, broken)
        with pytest.raises(ComputationError, match=r"\.h5: cannot be written: Input/output error"):
            write_point(tmp_path, IDENTITY, {}, LEVELS[:1], [])
        monkeypatch.undo()
        assert os.listdir(tmp_path / "points" / "01") == [f"{IDENTITY}.h5"]
    assert damaged(tmp_path, [(IDENTITY, name, checksum)]) == []


def test_a_folder_in_the_way_is_told(tmp_path):
    (tmp_path / "points").write_text("")
    with pytest.raises(ComputationError, match="cannot be written"):
        write_point(tmp_path, IDENTITY, {}, LEVELS, [])


def test_a_copy_is_the_same(tmp_path):
    (tmp_path / "other").mkdir()
    name, checksum = write_point(tmp_path, IDENTITY, {}, LEVELS, [])
    assert copy_point(tmp_path, tmp_path / "other", IDENTITY) == name
    assert damaged(tmp_path / "other", [(IDENTITY, name, checksum)]) == []
