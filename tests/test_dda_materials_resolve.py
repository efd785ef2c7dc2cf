"""find: everything that may stand for a material, and what is said when nothing does."""

import numpy as np
import pytest

from dda.errors import InputError
from dda.materials import Material, find


@pytest.mark.parametrize("spec", [1.33, "1.33", {"index": 1.33}, np.float64(1.33), 1.33 + 0j])
def test_a_number_is_a_refractive_index(spec):
    water = find(spec)
    assert water.index([300.0, 3000.0]) == pytest.approx([1.33, 1.33])
    assert water.range_nm is None


def test_an_integer_is_one_too():
    assert find(2).permittivity(500.0) == 4.0


@pytest.mark.parametrize("spec", [1.5 + 0.1j, {"index": [1.5, 0.1]}])
def test_complex_index(spec):
    assert find(spec).index(500.0) == pytest.approx(1.5 + 0.1j)


def test_constant_permittivity():
    assert find({"eps": [-10, 1]}).permittivity(500.0) == -10 + 1j
    assert find({"eps": 2.25}).permittivity(500.0) == 2.25


def test_page_and_short_name_agree():
    by_name, by_page = find("gold"), find("main/Au/Johnson")
    assert by_name.permittivity(600.0) == by_page.permittivity(600.0)
    assert find({"page": "main/Au/Johnson"}).model == by_page.model
    assert find({"material": "gold"}) == by_name


def test_a_material_is_returned_as_it_is():
    gold = find("gold")
    assert find(gold) is gold
    assert find(gold, extrapolate=True).extrapolate


def test_drude_table():
    metal = find({"model": "drude", "eps_inf": 5, "plasma_eV": 9, "damping_eV": 0.07})
    assert isinstance(metal, Material)
    energy = 1239.841984 / 600
    assert metal.permittivity(600.0) == pytest.approx(
        5 - 81 / (energy**2 + 0.07j * energy), rel=1e-8
    )


def test_mixture_table_nests():
    wet = {"model": "maxwell-garnett", "host": "water", "inclusion": "gold", "fraction": 0.1}
    outer = {"model": "bruggeman", "host": wet, "inclusion": {"index": 1.5}, "fraction": 0.5}
    assert find(outer).permittivity(600.0).imag > 0
    assert find(wet).range_nm == (200.0, 1129.0)
    assert "water" in find(wet).source or "Daimon" in find(wet).source


def test_size_corrected_table():
    spec = {"model": "size-corrected", "metal": "gold", "length_nm": 10.0, "A": 0.7}
    assert find(spec).permittivity(700.0).imag > find("gold").permittivity(700.0).imag


def test_label_and_range_of_a_model():
    fit = find({"model": "cauchy", "coefficients": [1.5, 0.004], "range_nm": [400, 900]})
    assert fit.range_nm == (400.0, 900.0)
    with pytest.raises(InputError, match="400 to 900 nm"):
        fit.index(1000.0)
    assert find({"index": 1.5, "name": "resist"}).name == "resist"


def test_extrapolation_reaches_the_parts_of_a_mixture():
    spec = {"model": "bruggeman", "host": "water", "inclusion": "gold", "fraction": 0.1}
    with pytest.raises(InputError, match="1129"):
        find(spec).permittivity(1500.0)
    assert np.isfinite(find(spec, extrapolate=True).permittivity(1500.0))


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("golld", "did you mean 'gold'"),
        ("watr", "did you mean 'water'"),
        ("Au/Johnson", "main/Au/Johnson"),
        ("W", "main/W/"),
        ("unobtainium-xyz", "`dda material` lists them"),
        ("", "unknown material ''"),
    ],
)
def test_unknown_names_get_help(name, message):
    with pytest.raises(InputError, match=message):
        find(name)


@pytest.mark.parametrize("spec", [-1.5, 0, float("nan"), float("inf"), 1.5 - 0.1j, "-2", "nan"])
def test_impossible_indices(spec):
    with pytest.raises(InputError, match="refractive index"):
        find(spec)


@pytest.mark.parametrize("spec", [True, None, ["gold"], object()])
def test_what_cannot_be_a_material(spec):
    with pytest.raises(InputError, match="a material cannot be"):
        find(spec)


DRUDE = {"model": "drude", "plasma_eV": 9.0, "damping_eV": 0.1}
OSCILLATOR = {"strength": 1.0, "resonance_eV": 3.0, "damping_eV": 0.2}


@pytest.mark.parametrize(
    ("spec", "message"),
    [
        ({}, "the table is empty"),
        ({"indx": 1.5}, "'indx' is unknown; did you mean 'index'"),
        ({"index": 1.5, "eps": 2.0}, "one of index, eps"),
        ({"index": 1.5, "k": 0.1}, "key 'k' is unknown"),
        ({"index": "1.5"}, "it must be n, or .n, k."),
        ({"index": [1.5, 0.1, 0.2]}, "it must be n, or .n, k."),
        ({"index": [1.5, -0.1]}, "k must be finite and 0 or more|0 or more"),
        ({"index": float("nan")}, "it must be n"),
        ({"eps": [-10, -1]}, "Im eps must be 0 or more"),
        ({"eps": 0}, "must not be 0"),
        ({"page": "main/Au/Jonson"}, "main/Au/Johnson"),
        ({"page": 3}, "page = 3"),
        ({"table": "no.csv"}, "no file"),
        ({"material": "golld"}, "gold"),
        ({"model": "drud"}, "did you mean 'drude'"),
        ({"model": 3}, "model = 3 is unknown"),
        ({"model": ["drude"]}, "is unknown"),
        (DRUDE | {"plasma_ev": 9.0}, "key 'plasma_ev' is unknown; did you mean 'plasma_eV'"),
        ({"model": "drude", "plasma_ev": 9.0, "damping_eV": 0.1}, "did you mean 'plasma_eV'"),
        ({"model": "drude", "plasma_eV": 9.0}, "key 'damping_eV' is missing"),
        (DRUDE | {"damping_eV": -0.1}, "damping_eV = -0.1"),
        (DRUDE | {"damping_eV": "0.1"}, "damping_eV = '0.1'"),
        (DRUDE | {"damping_eV": float("inf")}, "damping_eV = inf"),
        (DRUDE | {"range_nm": [800, 400]}, "range_nm"),
        (
            {"model": "drude-lorentz", "oscillators": [OSCILLATOR | {"strenth": 2.0}]},
            "'oscillators.0.strenth' is unknown; did you mean 'strength'",
        ),
        ({"model": "drude-lorentz", "oscillators": [{}]}, "'oscillators.0.strength' is missing"),
        ({"model": "drude-lorentz"}, "'oscillators' is missing"),
        ({"model": "sellmeier", "B": [1, 2], "C_um2": [0.1]}, "B has 2 numbers and C_um2 has 1"),
        ({"model": "cauchy", "coefficients": []}, "coefficients"),
        (
            {"model": "bruggeman", "host": "watr", "inclusion": "gold", "fraction": 0.1},
            "did you mean 'water'",
        ),
        (
            {"model": "bruggeman", "host": "water", "inclusion": "gold", "fraction": 1.5},
            "fraction = 1.5",
        ),
        ({"model": "size-corrected", "metal": "nickel", "length_nm": 5.0}, "plasma_eV"),
    ],
)
def test_wrong_tables_get_one_clear_message(spec, message):
    with pytest.raises(InputError, match=message) as caught:
        find(spec)
    assert "\n" not in str(caught.value)
    assert "pydantic" not in str(caught.value)


def test_message_for_a_negative_number_in_a_table_says_what_is_right():
    with pytest.raises(InputError, match="greater than or equal to 0"):
        find(DRUDE | {"plasma_eV": -1.0})
