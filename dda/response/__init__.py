"""What a detector sees of the induced dipoles."""

from .sections import CrossSections, cross_sections, extinction, scattering
from .far_field import scattering_amplitude

__all__ = ["CrossSections", "cross_sections", "extinction", "scattering", "scattering_amplitude"]
