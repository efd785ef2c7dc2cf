"""Short names: every one loads, covers the visible or says otherwise, and is what it claims."""

import numpy as np
import pytest

from dda.errors import InputError
from dda.materials import SHORT_NAMES, find
from dda.materials.names import from_short_name

# Those whose data do not span 400 to 800 nm, with what they span.
PARTIAL = {"titania-rutile": (430.0, 1530.0), "glycerol": (589.3, 1050.0)}


@pytest.mark.parametrize("name", SHORT_NAMES)
def test_covers_the_visible_and_is_passive(name):
    material = find(name)
    low, high = material.range_nm
    if name in PARTIAL:
        assert material.range_nm == pytest.approx(PARTIAL[name])
        with pytest.raises(InputError, match=f"{low:.4g} to {high:.4g} nm"):
            material.permittivity(400.0)
    else:
        assert low <= 400.0
        assert high >= 800.0
    eps = material.permittivity(np.linspace(max(low, 400.0), min(high, 800.0), 201))
    assert np.isfinite(eps).all()
    assert (eps.imag >= 0).all()
    assert material.name == name
    assert len(material.source) > 20


@pytest.mark.parametrize("name", ["gold", "silver", "copper"])
def test_noble_metals_are_johnson_and_christy(name):
    source = find(name).source
    assert "Johnson" in source
    assert "1972" in source


def test_the_names_that_were_asked_for_exist():
    asked = {"gold", "silver", "copper", "aluminium", "platinum", "titanium-nitride", "silicon"}
    asked |= {"silica", "titania", "water", "ethanol", "bk7", "polystyrene", "pmma", "sapphire"}
    asked |= {"chromium", "nickel", "palladium", "hematite", "magnetite"}
    assert asked <= set(SHORT_NAMES)


@pytest.mark.parametrize(
    ("alias", "name"),
    [
        ("Au", "gold"),
        ("aluminum", "aluminium"),
        ("  Fused Silica ", "silica"),
        ("TIN", "titanium-nitride"),
        ("titanium nitride", "titanium-nitride"),
        ("H2O", "water"),
    ],
)
def test_aliases(alias, name):
    assert from_short_name(alias).name == name


def test_no_two_names_claim_the_same_word():
    words = [w for entry in SHORT_NAMES.values() for w in (entry.name, *entry.aliases)]
    assert len(words) == len(set(words))


@pytest.mark.parametrize(
    ("name", "n", "tolerance"),
    [
        ("water", 1.333, 1e-3),
        ("silica", 1.458, 1e-3),
        ("ethanol", 1.361, 2e-3),  # handbook value (from memory)
        ("polystyrene", 1.59, 5e-3),  # handbook value (from memory)
        ("pmma", 1.491, 5e-3),  # handbook value (from memory)
        ("toluene", 1.496, 5e-3),  # handbook value (from memory)
        ("sapphire", 1.768, 1e-3),
        ("sf11", 1.784, 3e-3),  # n_d 1.78472 (from memory)
    ],
)
def test_index_at_the_sodium_line(name, n, tolerance):
    assert find(name).index(589.3).real == pytest.approx(n, abs=tolerance)


def test_water_has_the_n_of_one_page_and_the_k_of_another():
    water, n_page, k_page = find("water"), find("main/H2O/Daimon-20.0C"), find("main/H2O/Hale")
    assert water.index(700.0).real == pytest.approx(n_page.index(700.0).real, rel=1e-12)
    assert water.index(700.0).imag == pytest.approx(k_page.index(700.0).imag, rel=1e-6)
    assert water.range_nm == (200.0, 1129.0)
    assert not any("taken as 0" in note for note in water.notes)


def test_vacuum():
    assert find("vacuum").permittivity(500.0) == 1.0


def test_silver_is_a_better_metal_than_gold_in_the_blue():
    silver, gold = find("silver").permittivity(430.0), find("gold").permittivity(430.0)
    assert silver.real < 3 * gold.real < 0
    assert silver.imag < gold.imag / 5
