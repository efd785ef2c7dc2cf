"""Permittivities of materials: measured tables, models, mixtures, and the size correction.

>>> from dda.materials import find
>>> gold = find("gold")
>>> bool(gold.permittivity(600.0).real < 0)
True
"""

from dda.materials.damping import (
    FREE_ELECTRONS,
    FreeElectrons,
    effective_length,
    fermi_speed,
    plasma_energy,
    size_corrected,
)
from dda.materials.database import Page, search
from dda.materials.material import Material, require_transparent
from dda.materials.mixtures import mixture
from dda.materials.names import SHORT_NAMES
from dda.materials.resolve import Spec, constant_index, find

__all__ = [
    "FREE_ELECTRONS",
    "SHORT_NAMES",
    "FreeElectrons",
    "Material",
    "Page",
    "Spec",
    "constant_index",
    "effective_length",
    "fermi_speed",
    "find",
    "mixture",
    "plasma_energy",
    "require_transparent",
    "search",
    "size_corrected",
]
