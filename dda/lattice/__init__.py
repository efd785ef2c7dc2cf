"""The lattice of dipoles: interaction, polarizability, linear system and its solution."""

from .linear_system import System, memory_estimate, relative_system, system
from .solution import Polarization, solve, solve_dense

__all__ = [
    "Polarization",
    "System",
    "memory_estimate",
    "relative_system",
    "solve",
    "solve_dense",
    "system",
]
