"""The material itself: shapes, ranges, passivity, transparency of a host."""

import multiprocessing
import pickle

import numpy as np
import pytest

from dda.errors import InputError
from dda.materials import Material, find, require_transparent
from dda.materials.models import Constant, Drude


def test_shape_of_the_answer_is_the_shape_of_the_question():
    gold = find("gold")
    assert gold.permittivity(500.0).shape == ()
    assert gold.permittivity([500.0]).shape == (1,)
    assert gold.index(np.full((2, 3), 600.0)).shape == (2, 3)


def test_index_squared_is_the_permittivity():
    gold = find("gold")
    wavelength = np.linspace(200, 1900, 50)
    np.testing.assert_allclose(gold.index(wavelength) ** 2, gold.permittivity(wavelength))
    assert (gold.index(wavelength).real > 0).all()
    assert (gold.index(wavelength).imag > 0).all()


def test_lossless_metal_has_a_positive_k():
    """The sign of a zero must not turn sqrt(-10) into -i sqrt(10)."""
    metal = Material("metal", Constant(complex(-10.0, -0.0)))
    assert metal.index(500.0) == pytest.approx(1j * np.sqrt(10))
    assert np.copysign(1.0, metal.permittivity(500.0).imag) == 1.0


@pytest.mark.parametrize("wavelength", [0.0, -500.0, np.nan, np.inf])
def test_nonsense_wavelength_is_refused(wavelength):
    with pytest.raises(InputError, match="positive number of nm"):
        find("gold").permittivity([500.0, wavelength])


def test_gain_is_refused():
    laser = Material("laser", Constant(2.0 - 0.1j))
    with pytest.raises(InputError, match=r"laser.*600 nm.*gain"):
        laser.permittivity(600.0)


def test_out_of_range_gives_the_range():
    with pytest.raises(InputError, match=r"gold.*187\.9 to 1937 nm.*2000"):
        find("gold").permittivity([500.0, 2000.0])


def test_ends_of_the_range_belong_to_it():
    gold = find("gold")
    assert np.isfinite(gold.permittivity(gold.range_nm)).all()


def test_extrapolation_holds_n_and_k_and_says_so():
    gold = find("gold", extrapolate=True)
    assert gold.index(2500.0) == gold.index(1937.0)
    assert gold.index(100.0) == gold.index(187.9)
    assert "held constant" in gold.notes[-1]
    assert find("gold").permittivity(700.0) == gold.permittivity(700.0)


def test_extrapolating_twice_notes_it_once():
    once = find("gold", extrapolate=True)
    assert once.extrapolated() is once


@pytest.mark.parametrize(
    "spec",
    [
        "gold",
        "water",
        "bk7",
        1.5,
        {"model": "bruggeman", "host": "water", "inclusion": "gold", "fraction": 0.2},
        {"model": "size-corrected", "metal": "silver", "length_nm": 5.0},
    ],
)
def test_materials_pickle_and_hash(spec):
    material = find(spec)
    before = material.permittivity(550.0)
    copy = pickle.loads(pickle.dumps(material))
    assert copy == material
    assert hash(copy) == hash(material)
    assert copy.permittivity(550.0) == before


def test_a_material_serves_in_another_process():
    gold = find("gold")
    with multiprocessing.get_context("spawn").Pool(1) as pool:
        there = pool.apply(gold.permittivity, (550.0,))
    assert there == gold.permittivity(550.0)


def test_water_is_transparent_where_it_is():
    water = find("water")
    index = require_transparent(water, [250.0, 400.0, 589.3, 800.0, 1000.0, 1100.0])
    assert index.dtype == float
    assert not water.absorbing(1000.0)
    assert index[2] == water.index(589.3).real


def test_water_in_its_infrared_band_is_refused_as_a_host():
    with pytest.raises(InputError, match=r"host 'water-infrared' absorbs at 1940 nm.*decays"):
        require_transparent(find("water-infrared"), [800.0, 1940.0])


def test_absorbing_glass_and_lossless_metal_are_refused_as_hosts():
    with pytest.raises(InputError, match="absorbs at 500 nm"):
        require_transparent(find(1.5 + 0.01j), 500.0)
    with pytest.raises(InputError, match="absorbs"):
        require_transparent(Material("gas", Drude(1.0, 9.0, 0.0)), 500.0)


def test_threshold_is_relative_to_n():
    assert not find(2.0 + 1.9e-4j).absorbing(500.0)
    assert find(2.0 + 2.1e-4j).absorbing(500.0)
