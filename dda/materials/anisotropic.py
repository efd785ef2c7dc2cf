"""Anisotropic materials: three principal permittivities along axes turned in space."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from dda.errors import InputError
from dda.materials.material import Material


@dataclass(frozen=True)
class _Mean:
    """Mean of the principal permittivities; a picklable model."""

    principal: tuple[Material, Material, Material]

    def __call__(self, wavelength_nm: NDArray[np.float64], /) -> NDArray[np.complex128]:
        return np.mean([m.permittivity(wavelength_nm) for m in self.principal], axis=0)


@dataclass(frozen=True)
class AnisotropicMaterial(Material):
    """A crystal, or another material with three principal axes at right angles.

    ``permittivity`` and ``index`` of the base class are those of the mean of the three principal
    permittivities, for uses in which one number must do; the lattice takes ``tensor``.

    Attributes
    ----------
    principal : three Material
        Along the first, second and third axis.
    rotation : three rows of three numbers
        Turns x, y, z to these axes.
    """

    principal: tuple[Material, ...] = ()
    rotation: tuple[tuple[float, ...], ...] = ((1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0))

    def principal_permittivity(self, wavelength_nm: ArrayLike) -> NDArray[np.complex128]:
        """Permittivities along the three axes, shape (..., 3)."""
        return np.stack([m.permittivity(wavelength_nm) for m in self.principal], axis=-1)

    def tensor(self, wavelength_nm: ArrayLike) -> NDArray[np.complex128]:
        """Permittivity tensor in the frame of the lattice, symmetric, shape (..., 3, 3)."""
        turn = np.array(self.rotation)
        eps = self.principal_permittivity(wavelength_nm)
        return np.einsum("ik,...k,jk->...ij", turn, eps, turn)

    def extrapolated(self) -> AnisotropicMaterial:
        """The same material, its principal ones held constant beyond the ends of their ranges."""
        three = tuple(m.extrapolated() for m in self.principal)
        return replace(self, principal=three, model=_Mean((three[0], three[1], three[2])))


def anisotropic(principal: Sequence[Material], rotation: ArrayLike | None = None) -> Material:
    """Material with different permittivities along three axes.

    Parameters
    ----------
    principal : three Material
        Along the first, second and third principal axis; those are x, y, z before the rotation.
    rotation : ndarray, shape (3, 3), optional
        A rotation matrix, see `rotation_matrix`; none by default.

    Returns
    -------
    AnisotropicMaterial

    Raises
    ------
    InputError
        There are not three materials, one is anisotropic itself, or the matrix is no rotation.

    Examples
    --------
    >>> from dda.materials import find
    >>> calcite = anisotropic([find(1.658), find(1.658), find(1.486)])
    >>> calcite.tensor(589.3).real.round(3)
    array([[2.749, 0.   , 0.   ],
           [0.   , 2.749, 0.   ],
           [0.   , 0.   , 2.208]])
    """
    if len(principal) != 3:
        raise InputError(f"axes lists {len(principal)} materials; there are three principal axes")
    for material in principal:
        require_isotropic(material, "a principal axis")
    turn = np.eye(3) if rotation is None else np.asarray(rotation, float)
    if turn.shape != (3, 3) or not np.allclose(turn @ turn.T, np.eye(3), atol=1e-9):
        raise InputError("the axes of a material are turned by a rotation matrix, shape (3, 3)")
    names = ", ".join(m.name for m in principal)
    sources = dict.fromkeys(m.source for m in principal)
    notes = dict.fromkeys(note for m in principal for note in m.notes)
    three = (principal[0], principal[1], principal[2])
    rows = tuple(tuple(float(v) for v in row) for row in turn)
    return AnisotropicMaterial(
        f"axes {names}", _Mean(three), "; ".join(sources), None, tuple(notes), False, three, rows
    )


def require_isotropic(material: Material, role: str) -> Material:
    """Return the material, or raise InputError where it is anisotropic."""
    if isinstance(material, AnisotropicMaterial):
        raise InputError(f"material '{material.name}' is anisotropic; {role} must be isotropic")
    return material


def rotation_matrix(axis: ArrayLike, angle: float) -> NDArray[np.float64]:
    """Matrix of a turn about an axis, by degrees, counterclockwise seen from the axis' tip.

    >>> (rotation_matrix((0, 0, 1), 90) @ (1, 0, 0)).round(6) + 0
    array([0., 1., 0.])
    """
    from scipy.spatial.transform import Rotation

    along = np.asarray(axis, float)
    return Rotation.from_rotvec(np.radians(angle) * along / np.linalg.norm(along)).as_matrix()
