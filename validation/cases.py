"""Particles with an exact solution, on which the error bars of the program are put to the test.

Spheres, coated spheres and spheroids of gold, silver, copper, silica and silicon, 10 to 150 nm
across, 350 to 900 nm.  The wave travels along z and is polarised along x.  The choice covers the
method's difficult places (metals in the red, silver near its resonance, thin shells, flat and long
spheroids) as well as its easy ones; it was made before any result of the program was seen.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np

from dda.materials import find
from shapes import Particle, ellipsoid, sphere
from validation.coated import coated_sphere
from validation.ebcm import spheroid
from validation.mie import sphere as mie_sphere

MIE = "Mie series, Bohren & Huffman (1983)"
COATED = "layered sphere, Aden & Kerker (1951), Yang (2003)"
NULL_FIELD = "spheroid by the null-field method, Waterman (1971)"

Spec = str | float


@dataclass(frozen=True)
class Case:
    """A particle with an exact solution.

    Attributes
    ----------
    name : str
    family : str
        "sphere", "coated" or "ellipsoid".
    sizes : tuple of float
        nm: diameter; or core's and outer diameter; or full lengths along x, y, z, two of them
        equal.
    materials : tuple of str or float
        What `dda.materials.find` takes; for coated spheres (core, shell).
    wavelength : float
        In vacuum, nm.
    n_host : float
    source : str
        Where the exact solution comes from.
    """

    name: str
    family: str
    sizes: tuple[float, ...]
    materials: tuple[Spec, ...]
    wavelength: float
    n_host: float
    source: str

    def reference(self) -> tuple[float, float, float]:
        """C_ext, C_abs, C_sca in nm^2; C_abs is exactly zero where nothing absorbs.

        Examples
        --------
        >>> c_ext, c_abs, c_sca = CASES[0].reference()
        >>> abs(c_ext - c_abs - c_sca) < 1e-9 * c_ext
        True
        """
        return _reference(self)

    def particle(self) -> Particle:
        """The particle, made of the materials named by `palette`."""
        names = self.palette
        if self.family == "sphere":
            return sphere(self.sizes[0], names[0])
        if self.family == "coated":
            core, outer = sphere(self.sizes[0], names[0]), sphere(self.sizes[1], names[1])
            return Particle(outer.parts + core.parts)
        return ellipsoid(self.sizes, names[0])

    @property
    def palette(self) -> tuple[str, ...]:
        """Names of the materials in the particle; a number keeps its digits, "1.5"."""
        return tuple(str(spec) for spec in self.materials)

    def permittivities(self) -> list[complex]:
        """Absolute permittivities of the materials at the wavelength."""
        return [complex(find(spec).permittivity([self.wavelength])[0]) for spec in self.materials]


@cache
def _reference(case: Case) -> tuple[float, float, float]:
    eps = case.permittivities()
    if case.family == "sphere":
        solved = mie_sphere(case.sizes[0], case.wavelength, eps[0], case.n_host)
        c_ext, c_abs, c_sca = solved.c_ext, solved.c_abs, solved.c_sca
    elif case.family == "coated":
        layered = coated_sphere(case.sizes, case.wavelength, eps, case.n_host)
        c_ext, c_abs, c_sca = layered.c_ext, layered.c_abs, layered.c_sca
    else:
        c_ext, c_abs, c_sca = _spheroid(case, eps[0])
    if not any(e.imag for e in eps):
        return c_sca, 0.0, c_sca
    return c_ext, c_abs, c_sca


def _spheroid(case: Case, eps: complex) -> tuple[float, float, float]:
    """Turn the laboratory's wave (along z, polarised along x) into the spheroid's frame."""
    axis = odd_axis(case.sizes)
    equatorial, polar = case.sizes[axis - 1], case.sizes[axis]
    solved = spheroid(equatorial, polar, case.wavelength, eps, case.n_host)
    # Cyclic renaming of the axes takes the odd axis to z.
    direction = [float((i + axis + 1) % 3 == 2) for i in range(3)]
    polarization = [float((i + axis + 1) % 3 == 0) for i in range(3)]
    return solved.cross_sections(direction, polarization)


def odd_axis(sizes: tuple[float, ...]) -> int:
    """Which of the three lengths differs from the two others: 0, 1 or 2."""
    x, y, z = sizes
    if (x == y) + (y == z) + (x == z) != 1:
        raise ValueError(f"{sizes}: exactly two of the three lengths must be equal")
    return {y == z: 0, x == z: 1, x == y: 2}[True]


def _sphere(material: Spec, diameter: float, wavelength: float, n_host: float = 1.33) -> Case:
    name = f"{material} sphere {diameter:g} nm, {wavelength:g} nm, host {n_host:g}"
    return Case(name, "sphere", (diameter,), (material,), wavelength, n_host, MIE)


def _coated(
    core: Spec, inner: float, shell: Spec, outer: float, wavelength: float, n_host: float = 1.33
) -> Case:
    name = f"{core} {inner:g} nm in {shell} {outer:g} nm, {wavelength:g} nm, host {n_host:g}"
    return Case(name, "coated", (inner, outer), (core, shell), wavelength, n_host, COATED)


def _ellipsoid(
    material: Spec, x: float, y: float, z: float, wavelength: float, n_host: float = 1.33
) -> Case:
    name = f"{material} ellipsoid {x:g} x {y:g} x {z:g} nm, {wavelength:g} nm, host {n_host:g}"
    return Case(name, "ellipsoid", (x, y, z), (material,), wavelength, n_host, NULL_FIELD)


CASES: tuple[Case, ...] = (
    _sphere("gold", 10, 520),
    _sphere("gold", 20, 400),
    _sphere("gold", 20, 560),
    _sphere("gold", 40, 530),
    _sphere("gold", 40, 650),
    _sphere("gold", 60, 550, 1.0),
    _sphere("gold", 80, 600),
    _sphere("gold", 80, 785),
    _sphere("gold", 80, 450),
    _sphere("gold", 100, 620),
    _sphere("gold", 120, 700, 1.5),
    _sphere("gold", 150, 550),
    _sphere("gold", 150, 900),
    _sphere("silver", 10, 390),
    _sphere("silver", 20, 350),
    _sphere("silver", 40, 400),
    _sphere("silver", 40, 500),
    _sphere("silver", 60, 420, 1.0),
    _sphere("silver", 60, 450),
    _sphere("silver", 100, 480),
    _sphere("silver", 100, 700),
    _sphere("silver", 150, 400),
    _sphere("copper", 20, 580),
    _sphere("copper", 50, 400),
    _sphere("copper", 60, 620),
    _sphere("copper", 100, 650),
    _sphere("copper", 150, 800),
    _sphere("silica", 50, 400, 1.0),
    _sphere("silica", 100, 550, 1.0),
    _sphere("silica", 150, 700),
    _sphere("silicon", 30, 360),
    _sphere("silicon", 60, 450),
    _sphere("silicon", 100, 500, 1.0),
    _sphere("silicon", 120, 560),
    _sphere("silicon", 150, 650),
    _sphere("silicon", 150, 850, 1.0),
    _coated("silica", 20, "gold", 40, 600),
    _coated("silica", 60, "gold", 100, 650),
    _coated("silica", 80, "gold", 110, 750),
    _coated("silica", 100, "gold", 150, 850),
    _coated("gold", 20, "silica", 40, 530),
    _coated("gold", 50, "silica", 100, 550),
    _coated("gold", 80, "silica", 120, 600, 1.0),
    _coated("gold", 20, "silver", 40, 420),
    _coated("gold", 40, "silver", 60, 480),
    _coated("silver", 30, "gold", 60, 550),
    _coated("silver", 40, "silica", 80, 420),
    _coated("silver", 60, "silica", 90, 500),
    _coated("silica", 50, "silver", 80, 500),
    _coated("copper", 40, "silica", 80, 600),
    _coated("silica", 40, "copper", 80, 700),
    _coated("silicon", 60, "silica", 120, 480),
    _coated("silicon", 100, "gold", 150, 800),
    _coated("gold", 50, "silicon", 100, 700),
    _ellipsoid("gold", 20, 10, 10, 560),
    _ellipsoid("gold", 10, 20, 10, 520),
    _ellipsoid("gold", 10, 10, 20, 540),
    _ellipsoid("gold", 40, 20, 20, 620),
    _ellipsoid("gold", 20, 20, 12, 600),
    _ellipsoid("gold", 30, 12, 12, 700),
    _ellipsoid("gold", 90, 50, 50, 680),
    _ellipsoid("silver", 20, 12, 12, 450),
    _ellipsoid("silver", 12, 20, 20, 380),
    _ellipsoid("silver", 30, 30, 15, 500),
    _ellipsoid("silver", 40, 60, 40, 420),
    _ellipsoid("copper", 24, 12, 12, 640),
    _ellipsoid("copper", 40, 40, 20, 600),
    _ellipsoid("silica", 60, 30, 30, 450, 1.0),
    _ellipsoid("silica", 80, 80, 40, 600, 1.0),
    _ellipsoid("silicon", 40, 20, 20, 400),
    _ellipsoid("silicon", 60, 60, 30, 550),
    _ellipsoid("silicon", 50, 100, 50, 600),
)


def drawn(count: int, seed: int) -> tuple[Case, ...]:
    """Cases drawn at random, a third of each family: nobody chose them, nothing was tuned on them.

    Gold, silver, copper, platinum, silica or silicon; 12 to 140 nm; 380 to 850 nm; hosts of index
    1, 1.33 or 1.5; shells from a tenth to half of the radius, spheroids up to 2.2 times as long as
    wide or 1.8 times as wide as long.
    """
    random = np.random.default_rng(seed)
    found = []
    for number in range(count):
        wavelength = float(random.integers(38, 86) * 10)
        host = float(random.choice([1.0, 1.33, 1.5]))
        size = float(np.round(np.exp(random.uniform(np.log(12), np.log(140)))))
        one, other = (str(name) for name in random.choice(_DRAWN, 2, replace=False))
        if number % 3 == 0:
            found.append(_sphere(one, size, wavelength, host))
        elif number % 3 == 1:
            core = float(np.round(size * random.uniform(0.5, 0.9)))
            found.append(_coated(one, core, other, size, wavelength, host))
        else:
            axes = [float(np.round(size / random.choice([1.4, 1.8, 2.2])))] * 3
            if random.random() < 0.35:  # oblate
                axes = [size] * 3
                axes[int(random.integers(3))] = float(np.round(size / random.uniform(1.3, 1.8)))
            else:
                axes[int(random.integers(3))] = size
            found.append(_ellipsoid(one, axes[0], axes[1], axes[2], wavelength, host))
    return tuple(found)


_DRAWN = ("gold", "silver", "copper", "platinum", "silica", "silicon")
