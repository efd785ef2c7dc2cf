"""Error bars: refinement in the spacing and extrapolation."""

from .extrapolation import Estimate, extrapolate
from .refinement import LADDER, Level, Refined, combined, refine_at, refine_to, relative_error

__all__ = [
    "LADDER",
    "Estimate",
    "Level",
    "Refined",
    "combined",
    "extrapolate",
    "refine_at",
    "refine_to",
    "relative_error",
]
