"""Error bars: refinement in the spacing and extrapolation."""

from .extrapolation import Estimate, constants, extrapolate
from .refinement import LADDER, Level, Refined, combined, refine_at, refine_to, relative_error

__all__ = [
    "LADDER",
    "Estimate",
    "Level",
    "Refined",
    "combined",
    "constants",
    "extrapolate",
    "refine_at",
    "refine_to",
    "relative_error",
]
