"""The list of cases is what the error bars are judged on: complete, solvable, as stated."""

from itertools import pairwise

import numpy as np
import pytest

from validation.cases import CASES, Case, odd_axis
from validation.gans import ellipsoid


def test_the_list_covers_what_it_must():
    assert len(CASES) >= 66
    assert len({case.name for case in CASES}) == len(CASES)
    families = [case.family for case in CASES]
    assert min(families.count(f) for f in ("sphere", "coated", "ellipsoid")) >= 15
    used = {material for case in CASES for material in case.materials}
    assert used >= {"gold", "silver", "copper", "silica", "silicon"}
    for case in CASES:
        assert 350 <= case.wavelength <= 900
        assert 10 <= max(case.sizes) <= 150


def test_every_reference_is_physical():
    for case in CASES:
        c_ext, c_abs, c_sca = case.reference()
        assert c_ext == pytest.approx(c_abs + c_sca, rel=1e-12), case.name
        assert c_sca > 0, case.name
        lossless = all(eps.imag == 0 for eps in case.permittivities())
        assert (c_abs == 0) if lossless else (c_abs > 0), case.name


@pytest.mark.parametrize("case", CASES[::6], ids=lambda case: case.name)
def test_particle_has_the_stated_volume_and_materials(case):
    particle = case.particle()
    volumes = {
        "sphere": np.pi / 6 * case.sizes[-1] ** 3,
        "coated": np.pi / 6 * case.sizes[-1] ** 3,
        "ellipsoid": np.pi / 6 * np.prod(case.sizes),
    }
    assert particle.volume() == pytest.approx(volumes[case.family], rel=1e-3)
    assert set(particle.materials) == set(case.palette)


def test_core_is_inside_its_coat():
    """The core must win where both are, so it has to come after its coat."""
    case = next(c for c in CASES if c.family == "coated")
    outer, core = case.particle().parts
    assert (core.material, outer.material) == case.palette
    assert np.ptp(np.array(core.body.bounds), axis=0) == pytest.approx(case.sizes[0], rel=1e-6)


def test_odd_axis():
    assert [odd_axis(s) for s in ((2, 1, 1), (1, 2, 1), (1, 1, 2))] == [0, 1, 2]
    with pytest.raises(ValueError, match="exactly two"):
        odd_axis((1, 2, 3))


@pytest.mark.parametrize("long", [0, 1, 2])
def test_orientation_of_spheroids_against_electrostatics(long):
    """A 2 nm spheroid turned every way; electrostatics along x is right to its size squared."""
    sizes = tuple(2.0 if axis == long else 1.0 for axis in range(3))
    case = Case("turned", "ellipsoid", sizes, ("gold",), 600.0, 1.33, "")
    expected = ellipsoid(sizes, 600.0, case.permittivities()[0], 1.33).cross_sections((1, 0, 0))
    assert case.reference() == pytest.approx(expected, rel=5e-3)


def test_neighbouring_orientations_differ():
    """Along z and along y the wave meets different bodies once retardation counts."""
    found = [
        Case("turned", "ellipsoid", sizes, ("gold",), 600.0, 1.33, "").reference()[0]
        for sizes in ((120.0, 60.0, 60.0), (60.0, 120.0, 60.0), (60.0, 60.0, 120.0))
    ]
    assert all(abs(a / b - 1) > 0.02 for a, b in pairwise(found))
