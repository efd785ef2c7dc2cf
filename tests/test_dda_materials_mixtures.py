"""Mixing rules: limits, symmetry, bounds, and the branch of Bruggeman's root."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dda.errors import InputError
from dda.materials import find, mixture
from dda.materials.mixtures import RULES

WAVELENGTH = np.linspace(400, 800, 41)

passive = st.builds(complex, st.floats(-30, 30), st.floats(1e-3, 30))
fractions = st.floats(0, 1)


@pytest.mark.parametrize("rule", RULES)
def test_limits_are_the_constituents(rule):
    water, gold = find("water"), find("gold")
    none = mixture(rule, water, gold, 0.0).permittivity(WAVELENGTH)
    all_of_it = mixture(rule, water, gold, 1.0).permittivity(WAVELENGTH)
    np.testing.assert_allclose(none, water.permittivity(WAVELENGTH), rtol=1e-10, atol=1e-12)
    np.testing.assert_allclose(all_of_it, gold.permittivity(WAVELENGTH), rtol=1e-10)


@pytest.mark.parametrize("rule", RULES)
def test_a_material_mixed_with_itself_is_itself(rule):
    gold = find("gold")
    mixed = mixture(rule, gold, gold, 0.37).permittivity(WAVELENGTH)
    np.testing.assert_allclose(mixed, gold.permittivity(WAVELENGTH), rtol=1e-12)


@pytest.mark.parametrize("rule", ["bruggeman", "looyenga", "lorentz-lorenz"])
def test_phases_may_be_swapped(rule):
    water, gold = find("water"), find("gold")
    one = mixture(rule, water, gold, 0.3).permittivity(WAVELENGTH)
    other = mixture(rule, gold, water, 0.7).permittivity(WAVELENGTH)
    np.testing.assert_allclose(one, other, rtol=1e-10)


def test_maxwell_garnett_is_not_symmetric():
    water, gold = find("water"), find("gold")
    one = mixture("maxwell-garnett", water, gold, 0.3).permittivity(550.0)
    other = mixture("maxwell-garnett", gold, water, 0.7).permittivity(550.0)
    assert abs(one - other) > 0.1


@pytest.mark.parametrize("rule", RULES)
def test_rules_agree_to_first_order_at_low_contrast(rule):
    """eps = e1 + f (e2 - e1) - f (1-f) (e2-e1)^2 / (3 e1) + ..., the same for all but
    Lorentz-Lorenz, whose second-order term differs; the contrast is 1 per cent."""
    eps = RULES[rule](np.array(2.0 + 0j), np.array(2.02 + 0j), 0.25)
    assert eps.real == pytest.approx(2.0 + 0.25 * 0.02, abs=3e-5)


@given(passive, passive, fractions)
def test_bruggeman_solves_its_equation_with_a_passive_root(e1, e2, fraction):
    eps = complex(RULES["bruggeman"](np.array(e1), np.array(e2), fraction))
    assert eps.imag >= 0
    scale = abs(e1) + abs(e2)
    residual = 2 * eps**2 - eps * ((2 - 3 * fraction) * e1 + (3 * fraction - 1) * e2) - e1 * e2
    assert abs(residual) <= 1e-9 * scale**2


@given(passive, passive, fractions)
def test_every_rule_keeps_a_passive_mixture_passive(e1, e2, fraction):
    for rule, function in RULES.items():
        eps = complex(function(np.array(e1), np.array(e2), fraction))
        assert eps.imag >= -1e-9 * abs(eps), rule


def test_bruggeman_of_lossless_dielectrics_is_positive_and_between():
    eps = RULES["bruggeman"](np.array(1.0 + 0j), np.array(12.0 + 0j), np.linspace(0, 1, 21))
    assert (eps.imag == 0).all()
    assert (np.diff(eps.real) > 0).all()
    assert eps.real[[0, -1]] == pytest.approx([1.0, 12.0])


def test_bruggeman_of_a_lossless_metal_is_the_limit_of_vanishing_loss():
    """Below the percolation threshold of 1/3 and above it, and in the absorbing band between."""
    for fraction in (0.05, 0.3, 0.5, 0.9):
        limit = RULES["bruggeman"](np.array(2.0 + 1e-9j), np.array(-50.0 + 1e-9j), fraction)
        exact = RULES["bruggeman"](np.array(2.0 + 0j), np.array(-50.0 + 0j), fraction)
        assert exact == pytest.approx(limit, rel=1e-6)


def test_maxwell_garnett_has_the_resonance_of_a_sphere_when_dilute():
    """Absorption of a dilute mixture peaks where eps = -2 eps_host, the sphere's resonance."""
    metal = find({"model": "drude", "plasma_eV": 9.0, "damping_eV": 0.05, "eps_inf": 9.0})
    wavelength = np.linspace(420, 620, 4001)
    mixed = mixture("maxwell-garnett", find(1.33), metal, 1e-4).permittivity(wavelength)
    frohlich = wavelength[np.argmin(np.abs(metal.permittivity(wavelength).real + 2 * 1.33**2))]
    assert wavelength[np.argmax(mixed.imag)] == pytest.approx(frohlich, abs=0.5)


def test_range_is_what_both_have_in_common():
    mixed = mixture("bruggeman", find("glycerol"), find("titania-rutile"), 0.1)
    assert mixed.range_nm == pytest.approx((589.3, 1050.0))
    with pytest.raises(InputError, match="589"):
        mixed.permittivity(500.0)


def test_no_common_range_is_refused():
    with pytest.raises(InputError, match="no wavelength at which both"):
        mixture("bruggeman", find("gold"), find("main/Ru/Windt"), 0.1)


@pytest.mark.parametrize("fraction", [-0.1, 1.1, float("nan")])
def test_fraction_is_checked(fraction):
    with pytest.raises(InputError, match="fraction"):
        mixture("bruggeman", find("water"), find("gold"), fraction)


def test_unknown_rule_lists_the_rules():
    with pytest.raises(InputError, match="maxwell-garnett, bruggeman"):
        mixture("average", find("water"), find("gold"), 0.1)


def test_notes_warn_of_misuse():
    dense = mixture("maxwell-garnett", find("water"), find("gold"), 0.6)
    assert "about 0.3" in dense.notes[0]
