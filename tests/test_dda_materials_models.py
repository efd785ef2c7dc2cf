"""Analytic models: limits, causality, and the published fits they are made for."""

import numpy as np
import pytest
from scipy import constants, integrate

from dda.errors import InputError
from dda.materials import find
from dda.materials.models import Cauchy, Drude, DrudeLorentz, Oscillator
from dda.materials.units import EV_NM, photon_energy, to_wavelength


def imaginary(model, energy):
    return float(model(np.asarray(EV_NM / energy)).imag)


def test_energy_and_wavelength():
    """h c / e = 1239.84 eV nm."""
    expected = constants.h * constants.c / constants.e * 1e9
    assert pytest.approx(1239.842, abs=1e-3) == expected
    assert photon_energy(expected) == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("value", "column"),
    [
        (600.0, "wavelength_nm"),
        (0.6, "wavelength_um"),
        (EV_NM / 600, "energy_eV"),
        (299792.458 / 600, "frequency_THz"),
        (1e7 / 600, "wavenumber_cm"),
    ],
)
def test_every_spectral_column_means_the_same_wavelength(value, column):
    assert to_wavelength(value, column) == pytest.approx(600.0)


def test_drude_crosses_zero_at_the_screened_plasma_energy():
    metal = Drude(4.0, 9.0, 0.0)
    assert metal(np.array(EV_NM / 4.5)).real == pytest.approx(0.0, abs=1e-12)


def test_drude_goes_to_eps_inf_at_high_energy():
    assert Drude(4.0, 9.0, 0.1)(np.array(1e-2)) == pytest.approx(4.0, abs=1e-6)


@pytest.mark.parametrize(
    "model",
    [
        Drude(3.0, 9.0, 0.5),
        DrudeLorentz(3.0, 9.0, 0.5, (Oscillator(1.2, 2.7, 0.6), Oscillator(2.0, 4.0, 1.0))),
    ],
)
@pytest.mark.parametrize("energy", [1.0, 2.5, 6.0])
def test_kramers_and_kronig(model, energy):
    """Re eps - eps_inf = (2/pi) P int x Im eps(x) / (x^2 - E^2) dx, from 0 to infinity.

    The integral stops at 500 eV; what is left out is below (plasma/500)^2 times a small number.
    """

    def integrand(x):
        return x * imaginary(model, x) / (x + energy) if x > 0 else 0.0

    near, _ = integrate.quad(integrand, 1e-9, 3 * energy, weight="cauchy", wvar=energy, limit=400)
    far, _ = integrate.quad(lambda x: integrand(x) / (x - energy), 3 * energy, 500.0, limit=800)
    real = float(model(np.asarray(EV_NM / energy)).real)
    assert 2 / np.pi * (near + far) == pytest.approx(real - 3.0, rel=1e-3, abs=1e-3)


def test_sum_rule_of_the_drude_term():
    """int E Im eps dE = (pi/2) Ep^2; the tail beyond 2000 eV holds 2 g / (pi 2000) = 2e-4 of it."""
    model = Drude(1.0, 9.0, 0.5)
    total, _ = integrate.quad(
        lambda x: x * imaginary(model, x), 1e-9, 2000.0, limit=800, points=[0.1, 1.0, 10.0, 100.0]
    )
    assert total == pytest.approx(np.pi / 2 * 81.0, rel=5e-4)


def test_oscillator_strength_is_its_share_of_the_static_permittivity():
    model = DrudeLorentz(1.0, 0.0, 0.0, (Oscillator(2.5, 4.0, 0.3),))
    assert model(np.array(1e7)).real == pytest.approx(3.5, abs=1e-6)


# Gold of Etchegoin, Le Ru & Meyer 2006, table I, in their wavelengths in nm (from memory):
# eps_inf 1.53, plasma 145, damping 17000; A 0.94, 468, damping 2300; A 1.36, 331, damping 940.
ETCHEGOIN_GOLD = {
    "model": "drude-critical-points",
    "eps_inf": 1.53,
    "plasma_eV": EV_NM / 145,
    "damping_eV": EV_NM / 17000,
    "critical_points": [
        {"amplitude": 0.94, "energy_eV": EV_NM / 468, "damping_eV": EV_NM / 2300},
        {"amplitude": 1.36, "energy_eV": EV_NM / 331, "damping_eV": EV_NM / 940},
    ],
}


def test_critical_points_fit_gold():
    """The fit was made to the gold of Johnson & Christy; it holds to better than 1 in eps."""
    wavelength = np.linspace(400, 1000, 61)
    fit = find(ETCHEGOIN_GOLD).permittivity(wavelength)
    assert np.abs(fit - find("gold").permittivity(wavelength)).max() < 1.0


def test_sellmeier_of_fused_silica_is_malitson():
    spec = {
        "model": "sellmeier",
        "B": [0.6961663, 0.4079426, 0.8974794],
        "C_um2": [0.0684043**2, 0.1162414**2, 9.896161**2],
    }
    wavelength = np.linspace(300, 2000, 20)
    np.testing.assert_allclose(
        find(spec).index(wavelength), find("silica").index(wavelength), rtol=1e-12
    )


def test_sellmeier_at_its_pole_is_refused():
    pole = find({"model": "sellmeier", "B": [1.0], "C_um2": [0.25]})
    with pytest.raises(InputError, match="not a number"):
        pole.permittivity(500.0)


def test_cauchy_is_a_polynomial_in_the_inverse_square():
    n = np.sqrt(Cauchy((1.5, 4e-3, 1e-4))(np.array(500.0))).real
    assert n == pytest.approx(1.5 + 4e-3 / 0.25 + 1e-4 / 0.0625)
