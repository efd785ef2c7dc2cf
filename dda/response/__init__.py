"""What a detector sees of the induced dipoles."""

from .far_field import scattering_amplitude
from .sections import CrossSections, cross_sections, extinction, scattering
from .settled import Settled, settle

__all__ = [
    "CrossSections",
    "Settled",
    "cross_sections",
    "extinction",
    "scattering",
    "scattering_amplitude",
    "settle",
]
