"""User tables: every unit and column set, and one clear error for every mistake."""

import numpy as np
import pytest

from dda.errors import InputError
from dda.materials import find
from dda.materials.units import EV_NM


@pytest.fixture
def write(tmp_path):
    def write(text, name="film.csv"):
        file = tmp_path / name
        file.write_text(text, encoding="utf-8")
        return file

    return write


GOOD = "# our film\n# measured in June\nwavelength_nm,n,k\n400,1.5,0.1\n500,1.4,0.2\n600,1.3,0\n"


def test_reads_n_and_k_and_the_comment_as_source(write):
    film = find(write(GOOD))
    assert film.index(500.0) == pytest.approx(1.4 + 0.2j)
    assert film.range_nm == (400.0, 600.0)
    assert film.source.startswith("our film measured in June")


def test_relative_path_starts_at_the_base_directory(write, tmp_path, monkeypatch):
    write(GOOD)
    monkeypatch.chdir("/")
    assert find("film.csv", base_dir=tmp_path).index(400.0) == pytest.approx(1.5 + 0.1j)
    assert find({"table": "film.csv"}, base_dir=tmp_path).index(400.0) == pytest.approx(1.5 + 0.1j)
    with pytest.raises(InputError, match=r"no file 'film\.csv'"):
        find("film.csv")


@pytest.mark.parametrize(
    ("column", "values"),
    [
        ("wavelength_um", (0.4, 0.5, 0.6)),
        ("energy_eV", (EV_NM / 400, EV_NM / 500, EV_NM / 600)),
        ("frequency_THz", (299792.458 / 400, 299792.458 / 500, 299792.458 / 600)),
        ("wavenumber_cm", (25000.0, 20000.0, 1e7 / 600)),
        ("Wavelength_NM", (400, 500, 600)),
    ],
)
def test_every_unit_means_the_same(write, column, values):
    rows = zip(values, ("1.5,0.1", "1.4,0.2", "1.3,0"), strict=True)
    text = f"{column},n,k\n" + "\n".join(f"{value!r},{rest}" for value, rest in rows)
    film, same = find(write(text)), find(write(GOOD, "same.csv"))
    assert film.range_nm == pytest.approx(same.range_nm)
    wavelength = np.linspace(401, 599, 9)
    np.testing.assert_allclose(film.index(wavelength), same.index(wavelength), rtol=1e-9)


def test_permittivity_columns_and_any_order_of_columns(write):
    film = find(write("eps_im, eps_re, energy_eV\n1.0,-10,2.0\n0.5,-5,2.5\n0,-1,3\n"))
    assert film.permittivity(EV_NM / 2.5) == pytest.approx(-5 + 0.5j)
    assert film.permittivity(EV_NM / 3).imag == pytest.approx(0, abs=1e-12)


def test_n_alone_means_no_absorption_and_says_so(write):
    film = find(write("wavelength_nm,n\n400,1.5\n500,1.4\n"))
    assert film.permittivity(450.0).imag == 0
    assert "k is taken as 0" in film.notes[0]


def test_byte_order_mark_and_blank_lines_do_no_harm(write):
    assert find(write("\ufeff" + GOOD + "\n\n")).range_nm == (400.0, 600.0)


def test_out_of_range_and_extrapolation(write):
    file = write(GOOD)
    with pytest.raises(InputError, match="400 to 600 nm"):
        find(file).index(700.0)
    assert find(file, extrapolate=True).index(700.0) == pytest.approx(1.3)
    assert find({"table": str(file), "extrapolate": True}).index(300.0) == pytest.approx(1.5 + 0.1j)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "empty"),
        ("# only a comment\n", "empty"),
        ("wavelength_nm,n,k\n", "0 rows"),
        ("wavelength_nm,n,k\n400,1.5,0\n", "1 rows of data; a table needs at least 2"),
        ("400,1.5,0.1\n500,1.4,0.2\n", "line 1: column '400'"),
        ("wavelength,n,k\n400,1,0\n500,1,0\n", "column 'wavelength' .nearest: 'wavelength_"),
        ("# c\nwavelength_nm,n,kappa\n400,1,0\n", "line 2: column 'kappa'"),
        ("wavelength_nm,k\n400,1\n500,1\n", "line 1: columns wavelength_nm, k"),
        ("wavelength_nm,n,eps_im\n400,1,0\n500,1,0\n", "line 1: columns"),
        ("n,k\n1,0\n1,0\n", "the header names one of wavelength_nm"),
        ("wavelength_nm,energy_eV,n\n400,3.1,1\n500,2.5,1\n", "line 1: columns"),
        ("wavelength_nm,n,n\n400,1,1\n500,1,1\n", "named twice"),
        ("wavelength_nm,n,k\n400,1.5,0\n500,nan,0\n", "line 3: n is 'nan'"),
        ("wavelength_nm,n,k\n400,1.5,0\n\n500,1.4,inf\n", "line 4: k is 'inf'"),
        ("wavelength_nm,n,k\n400,1.5,0\n500,,0\n", "line 3: n is ''"),
        ("wavelength_nm,n,k\n400,1.5,0\n500,abc,0\n", "line 3: n is 'abc'"),
        ("wavelength_nm,n,k\n400,1.5\n500,1.4,0\n", "line 2: 2 cells"),
        ("wavelength_nm,n,k\n400,1,5,0\n500,1,4,0\n", "line 2: 4 cells.*decimals take a point"),
        ("wavelength_nm,n,k\n-400,1.5,0\n500,1.4,0\n", "line 2: wavelength_nm = -400"),
        ("wavelength_nm,n,k\n400,1.5,0\n500,1.4,-0.1\n", "line 3: k = -0.1.*exp"),
        ("wavelength_nm,n,k\n400,1.5,0\n500,0,0.1\n", "line 3: n = 0 must be positive"),
        ("energy_eV,eps_re,eps_im\n2,-9,1\n3,-2,-1\n", "line 3: eps_im = -1"),
        ("wavelength_nm,n\n400,1\n500,1\n450,1\n", "line 4: wavelength_nm = 450 comes after 500"),
        ("wavelength_nm,n\n400,1\n400,1\n", "line 3: wavelength_nm = 400 again"),
    ],
)
def test_mistakes_name_the_file_and_the_line(write, text, message):
    with pytest.raises(InputError, match=f"(?s)film.csv.*{message}"):
        find(write(text))


def test_a_folder_or_a_picture_is_not_a_table(tmp_path):
    folder = tmp_path / "folder.csv"
    folder.mkdir()
    with pytest.raises(InputError, match="cannot read"):
        find(folder)
    picture = tmp_path / "picture.csv"
    picture.write_bytes(b"\x89PNG\xff\xfe\x00")
    with pytest.raises(InputError, match="cannot read"):
        find(picture)
