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

from .errors import ComputationError, InputError
from .lattice import Polarization, System, solve, system
from .light import PlaneWave, plane_wave
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
    "plane_wave",
    "settle",
    "solve",
    "system",
]
