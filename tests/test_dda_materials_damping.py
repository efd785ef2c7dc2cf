"""Size correction: textbook numbers, and the limits of the correction."""

import numpy as np
import pytest
from scipy import constants

from dda.errors import InputError
from dda.materials import (
    FREE_ELECTRONS,
    effective_length,
    fermi_speed,
    find,
    plasma_energy,
    size_corrected,
)
from dda.materials.material import Material
from dda.materials.models import Drude


def test_fermi_speed_of_copper():
    assert fermi_speed(7.0) == pytest.approx(1.57e6, rel=2e-3)


def test_plasma_energy_of_gold_from_its_density():
    """19.3 g/cm^3, 196.97 g/mol, one electron an atom."""
    density = 19.3e3 / 0.19697 * constants.N_A
    assert density == pytest.approx(5.9e28, rel=1e-3)
    assert plasma_energy(density) == pytest.approx(9.0, abs=0.05)


def test_heavier_electrons_have_a_lower_plasma_energy():
    assert plasma_energy(5.9e28, optical_mass=4.0) == pytest.approx(plasma_energy(5.9e28) / 2)


def test_effective_length_of_a_sphere_and_a_cube():
    radius, edge = 5.0, 7.0
    sphere = effective_length(4 / 3 * np.pi * radius**3, 4 * np.pi * radius**2)
    assert sphere == pytest.approx(4 * radius / 3)
    assert effective_length(edge**3, 6 * edge**2) == pytest.approx(2 * edge / 3)


def test_a_drude_metal_becomes_a_drude_metal_of_larger_damping():
    bulk = Material("metal", Drude(5.0, 9.0, 0.07))
    small = size_corrected(bulk, 10.0, A=0.5, v_F=1.4e6, plasma_eV=9.0, damping_eV=0.07)
    # hbar A v_F / L in eV
    added = constants.hbar * 0.5 * 1.4e6 / 10e-9 / constants.e
    expected = Material("metal", Drude(5.0, 9.0, 0.07 + added))
    wavelength = np.linspace(300, 2000, 30)
    np.testing.assert_allclose(
        small.permittivity(wavelength), expected.permittivity(wavelength), rtol=1e-10
    )


@pytest.mark.parametrize("metal", FREE_ELECTRONS)
def test_large_particles_are_bulk_and_small_ones_lossier(metal):
    bulk = find(metal)
    wavelength = np.linspace(500, 1000, 11)
    eps = bulk.permittivity(wavelength)
    large = size_corrected(bulk, 1e7).permittivity(wavelength)
    np.testing.assert_allclose(large, eps, rtol=1e-5)
    imag = [size_corrected(bulk, L).permittivity(wavelength).imag for L in (40.0, 20.0, 10.0, 5.0)]
    assert (np.diff([eps.imag, *imag], axis=0) > 0).all()


def test_no_surface_scattering_for_a_of_zero():
    gold = find("gold")
    assert size_corrected(gold, 5.0, A=0.0).permittivity(600.0) == pytest.approx(
        gold.permittivity(600.0), rel=1e-14
    )


def test_free_electron_data_are_consistent_with_the_tables_in_the_infrared():
    """Far below the interband edge the loss is the Drude term's, and bound electrons add to Re eps.

    The parameters come from fits of that range (Johnson & Christy 1972), stated to about 10 per
    cent; bound electrons of these metals are worth up to about 12 in eps.
    """
    for metal, free in FREE_ELECTRONS.items():
        table = find(metal).permittivity(1500.0)
        drude = Drude(1.0, free.plasma_eV, free.damping_eV)(np.array(1500.0))
        assert drude.imag == pytest.approx(table.imag, rel=0.1), metal
        assert 0 < table.real - drude.real < 13, metal


def test_note_states_the_correction():
    small = size_corrected(find("silver"), 8.0)
    assert "Coronado" in small.notes[-1]
    assert "L = 8 nm" in small.notes[-1]
    assert small.range_nm == find("silver").range_nm


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"fermi_energy_eV": 5.0, "v_F": 1e6}, "not both"),
        ({"length_nm": 0.0}, "length_nm must be positive"),
        ({"length_nm": float("nan")}, "length_nm"),
        ({"A": -1.0}, "A = -1"),
        ({"plasma_eV": -9.0}, "plasma_eV = -9"),
    ],
)
def test_wrong_numbers_are_refused(changes, message):
    with pytest.raises(InputError, match=message):
        size_corrected(find("gold"), **{"length_nm": 10.0, **changes})


def test_unknown_metal_needs_its_free_electrons():
    with pytest.raises(InputError, match=r"nickel.*give fermi_energy_eV, plasma_eV, damping_eV"):
        size_corrected(find("nickel"), 10.0)
    with pytest.raises(InputError, match=r"give plasma_eV, damping_eV"):
        size_corrected(find("nickel"), 10.0, v_F=1e6)
