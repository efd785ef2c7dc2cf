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
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

from .errors import ComputationError, InputError

if TYPE_CHECKING:
    from .lattice import Polarization, System, solve, system
    from .light import PlaneWave, plane_wave
    from .report.dataset import open_point, open_run
    from .response import CrossSections, Settled, cross_sections, settle
    from .response.averages import OrientationAverage, orientation_average
    from .response.directions import quadrature_average
    from .response.mueller import averaged_mueller_matrix, mueller_matrix
    from .response.multipoles import Multipoles, averaged_multipoles, multipoles
    from .response.one_direction import OneDirection, one_direction, radiation_pressure
    from .response.pair import Pair, pair
    from .response.tmatrix import TMatrix
    from .response.tmatrix_file import load_t_matrix, save_t_matrix
    from .response.tmatrix_solve import t_matrix

__all__ = [
    "ComputationError",
    "CrossSections",
    "InputError",
    "Multipoles",
    "OneDirection",
    "OrientationAverage",
    "Pair",
    "PlaneWave",
    "Polarization",
    "Settled",
    "System",
    "TMatrix",
    "averaged_mueller_matrix",
    "averaged_multipoles",
    "cross_sections",
    "load_t_matrix",
    "mueller_matrix",
    "multipoles",
    "one_direction",
    "open_point",
    "open_run",
    "orientation_average",
    "pair",
    "plane_wave",
    "quadrature_average",
    "radiation_pressure",
    "save_t_matrix",
    "settle",
    "solve",
    "system",
    "t_matrix",
]

# Where a name lives: its module is imported when it is first asked for, because compiled kernels
# and data structures take longer to import than a command such as `dda status` to answer.
_HOMES = {
    "lattice": ("Polarization", "System", "solve", "system"),
    "light": ("PlaneWave", "plane_wave"),
    "report.dataset": ("open_point", "open_run"),
    "response": ("CrossSections", "Settled", "cross_sections", "settle"),
    "response.averages": ("OrientationAverage", "orientation_average"),
    "response.directions": ("quadrature_average",),
    "response.mueller": ("averaged_mueller_matrix", "mueller_matrix"),
    "response.multipoles": ("Multipoles", "averaged_multipoles", "multipoles"),
    "response.one_direction": ("OneDirection", "one_direction", "radiation_pressure"),
    "response.pair": ("Pair", "pair"),
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
