"""T-matrices survive a file, and files that are none are refused."""

import h5py
import numpy as np
import pytest

import dda
from dda.response.tmatrix import TMatrix
from dda.response.tmatrix_file import load_t_matrix, save_t_matrix, t_matrix_arrays
from dda.response.vector_waves import wave_count


def example():
    rng = np.random.default_rng(0)
    size = (wave_count(2),) * 2
    matrix = rng.normal(size=size) + 1j * rng.normal(size=size)
    return TMatrix(matrix, 560.0, 1.33, np.array([1.0, 2, 3]), 30.0, 20.0, 1.5, 0.5, 12.25, "limit")


def test_there_and_back(tmp_path):
    t, path = example(), tmp_path / "t.h5"
    save_t_matrix(t, path)
    back = load_t_matrix(path)
    assert np.array_equal(back.matrix, t.matrix)
    assert np.array_equal(back.origin, t.origin)
    for name in (
        "wavelength",
        "n_host",
        "radius",
        "r_eff",
        "order_error",
        "solver_error",
        "products",
        "status",
        "order",
    ):
        assert getattr(back, name) == getattr(t, name)


def test_the_file_explains_itself(tmp_path):
    t, path = example(), tmp_path / "t.h5"
    save_t_matrix(t, path)
    with h5py.File(path) as file:
        assert "exp(-i w t)" in file.attrs["convention"]
        assert file["wavelength"].attrs["unit"] == "nm"
        kinds = [k.decode() for k in file["wave_kind"][()]]
        assert kinds[0].startswith("magnetic")
        assert kinds[-1].startswith("electric")
        assert file["wave_order_n"][()].tolist() == t.labels[:, 1].tolist()
        assert file["wave_degree_m"][()].tolist() == t.labels[:, 2].tolist()
    assert [p.name for p in tmp_path.iterdir()] == ["t.h5"]  # nothing half-written is left


def test_a_file_is_replaced_as_a_whole(tmp_path):
    path = tmp_path / "t.h5"
    path.write_text("something else")
    save_t_matrix(example(), path)
    assert load_t_matrix(path).order == 2


def test_other_files_are_refused(tmp_path):
    with pytest.raises(dda.InputError, match="no file"):
        load_t_matrix(tmp_path / "missing.h5")
    text = tmp_path / "text.h5"
    text.write_text("not a T-matrix")
    with pytest.raises(dda.InputError, match="cannot be read"):
        load_t_matrix(text)
    other = tmp_path / "other.h5"
    with h5py.File(other, "w") as file:
        file["matrix"] = np.eye(2)
    with pytest.raises(dda.InputError, match="not a T-matrix file"):
        load_t_matrix(other)
    save_t_matrix(example(), other)
    with h5py.File(other, "r+") as file:
        del file["origin"]
    with pytest.raises(dda.InputError, match="cannot be read"):
        load_t_matrix(other)


def test_a_group_of_another_file_is_read(tmp_path):
    t, path = example(), tmp_path / "point.h5"
    with h5py.File(path, "w") as file:
        for name, values, _, _ in t_matrix_arrays(t):
            file[f"t_matrix/{name}"] = values
    back = load_t_matrix(path, "t_matrix")
    assert np.array_equal(back.matrix, t.matrix)
    assert (back.status, back.order_error) == (t.status, t.order_error)
    with pytest.raises(dda.InputError, match='load group "t_matrix"'):
        load_t_matrix(path)
    with pytest.raises(dda.InputError, match="cannot be read"):
        load_t_matrix(path, "elsewhere")
