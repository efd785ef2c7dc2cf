"""Discrete-dipole predictions for plasmonic nanoparticles.

The main job reads like the method, a line each:

>>> import dda, shapes
>>> particle = shapes.sphere(diameter=40, material="gold")
>>> cells = shapes.voxelize(particle, cells=12)
>>> system = dda.system(cells, wavelength=530, host="water")
>>> polarization = dda.solve(system, dda.plane_wave())
>>> response = dda.cross_sections(polarization)
>>> 3700 < response.c_ext < 3850  # nm^2; the Mie series gives 3798
True

A colloid, whose particles tumble, from one T-matrix:

>>> t = dda.t_matrix(system)
>>> average = dda.orientation_average(t)
>>> bool(abs(average.c_ext / response.c_ext - 1) < 0.01)  # a sphere looks alike from everywhere
True

Fields, hot spots, SERS factors and heat on a surface, and an emitter beside the particle:

>>> shell = dda.cover_surface(particle, step=4, height=4)
>>> near = dda.fields_at(polarization, shell.points, particle=particle)
>>> numbers = dda.field_numbers(shell.points, near.e2, shell.areas)
>>> bool(numbers.maximum > 10)  # |E|^2 over the incident wave's
True
>>> rates = dda.emitter_rates(system, position=(0, 0, 35), moment=(0, 0, 1))
>>> rates.radiative > 1 > rates.quantum_yield()
True
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

from .errors import ComputationError, InputError

if TYPE_CHECKING:
    from .beams import GaussianBeam, PointDipole, gaussian_beam, point_dipole
    from .design.emitter import DecayRates, averaged_rates, emitter_rates, refined_rates
    from .design.heat import Heat, absorbed_power, power_density
    from .design.sers import Sers, sers_averaged, sers_factor, sers_on_surface, stokes_wavelength
    from .lattice import Polarization, System, solve, system
    from .light import PlaneWave, plane_wave
    from .report.dataset import open_point, open_run
    from .response import CrossSections, Settled, cross_sections, settle
    from .response.averages import OrientationAverage, orientation_average
    from .response.directions import quadrature_average
    from .response.hot_spots import HotSpots, field_numbers, find_hot_spots
    from .response.mueller import averaged_mueller_matrix, mueller_matrix
    from .response.multipoles import Multipoles, averaged_multipoles, multipoles
    from .response.near_error import RefinedField, refined_field
    from .response.near_field import NearField, fields_at
    from .response.one_direction import OneDirection, one_direction, radiation_pressure
    from .response.pair import Pair, pair
    from .response.surface_points import SurfacePoints, cover_surface
    from .response.tmatrix import TMatrix
    from .response.tmatrix_file import load_t_matrix, save_t_matrix
    from .response.tmatrix_solve import t_matrix

__all__ = [
    "ComputationError",
    "CrossSections",
    "DecayRates",
    "GaussianBeam",
    "Heat",
    "HotSpots",
    "InputError",
    "Multipoles",
    "NearField",
    "OneDirection",
    "OrientationAverage",
    "Pair",
    "PlaneWave",
    "PointDipole",
    "Polarization",
    "RefinedField",
    "Sers",
    "Settled",
    "SurfacePoints",
    "System",
    "TMatrix",
    "absorbed_power",
    "averaged_mueller_matrix",
    "averaged_multipoles",
    "averaged_rates",
    "cover_surface",
    "cross_sections",
    "emitter_rates",
    "field_numbers",
    "fields_at",
    "find_hot_spots",
    "gaussian_beam",
    "load_t_matrix",
    "mueller_matrix",
    "multipoles",
    "one_direction",
    "open_point",
    "open_run",
    "orientation_average",
    "pair",
    "plane_wave",
    "point_dipole",
    "power_density",
    "quadrature_average",
    "radiation_pressure",
    "refined_field",
    "refined_rates",
    "save_t_matrix",
    "sers_averaged",
    "sers_factor",
    "sers_on_surface",
    "settle",
    "solve",
    "stokes_wavelength",
    "system",
    "t_matrix",
]

# Where a name lives: its module is imported when it is first asked for, because compiled kernels
# and data structures take longer to import than a command such as `dda status` to answer.
_HOMES = {
    "beams": ("GaussianBeam", "PointDipole", "gaussian_beam", "point_dipole"),
    "design.emitter": ("DecayRates", "averaged_rates", "emitter_rates", "refined_rates"),
    "design.heat": ("Heat", "absorbed_power", "power_density"),
    "design.sers": (
        "Sers",
        "sers_averaged",
        "sers_factor",
        "sers_on_surface",
        "stokes_wavelength",
    ),
    "lattice": ("Polarization", "System", "solve", "system"),
    "light": ("PlaneWave", "plane_wave"),
    "report.dataset": ("open_point", "open_run"),
    "response": ("CrossSections", "Settled", "cross_sections", "settle"),
    "response.averages": ("OrientationAverage", "orientation_average"),
    "response.directions": ("quadrature_average",),
    "response.hot_spots": ("HotSpots", "field_numbers", "find_hot_spots"),
    "response.mueller": ("averaged_mueller_matrix", "mueller_matrix"),
    "response.multipoles": ("Multipoles", "averaged_multipoles", "multipoles"),
    "response.near_error": ("RefinedField", "refined_field"),
    "response.near_field": ("NearField", "fields_at"),
    "response.one_direction": ("OneDirection", "one_direction", "radiation_pressure"),
    "response.pair": ("Pair", "pair"),
    "response.surface_points": ("SurfacePoints", "cover_surface"),
    "response.tmatrix": ("TMatrix",),
    "response.tmatrix_file": ("load_t_matrix", "save_t_matrix"),
    "response.tmatrix_solve": ("t_matrix",),
}
_HOME_OF = {name: home for home, names in _HOMES.items() for name in names}


def __getattr__(name: str) -> Any:
    if name in _HOME_OF:
        found = getattr(import_module(f"dda.{_HOME_OF[name]}"), name)
    elif name in _HOMES:
        found = import_module(f"dda.{name}")
    else:
        raise AttributeError(f"module 'dda' has no attribute {name!r}")
    globals()[name] = found
    return found


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__, "lattice", "light", "response"})
