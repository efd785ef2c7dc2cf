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
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

from .errors import ComputationError, InputError

if TYPE_CHECKING:
    from .lattice import Polarization, System, solve, system
    from .light import PlaneWave, plane_wave
    from .report.dataset import open_point, open_run
    from .response import CrossSections, Settled, cross_sections, settle

__all__ = [
    "ComputationError",
    "CrossSections",
    "InputError",
    "PlaneWave",
    "Polarization",
    "Settled",
    "System",
    "cross_sections",
    "open_point",
    "open_run",
    "plane_wave",
    "settle",
    "solve",
    "system",
]

# Where a name lives: its module is imported when it is first asked for, because compiled kernels
# and data structures take longer to import than a command such as `dda status` to answer.
_HOMES = {
    "lattice": ("Polarization", "System", "solve", "system"),
    "light": ("PlaneWave", "plane_wave"),
    "report.dataset": ("open_point", "open_run"),
    "response": ("CrossSections", "Settled", "cross_sections", "settle"),
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
