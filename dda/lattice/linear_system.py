"""The linear system of the cells at one wavelength."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from shapes import Cells

from .. import materials as _materials
from ..errors import InputError
from .anisotropy import anisotropic_cells, kept_mirrors
from .convolution import Convolution
from .green import RadialTable, radial_table
from .kernel import kernel, padded_shape
from .polarizability import CellTensor, inverse_polarizability, uniaxial
from .workers import Workers

SURFACES = ("window", "cell", "whole")

# A cell belongs to the system when more than this part of its window is filled. What is left out
# is an error of first order in the spacing: at 0.02 it was 0.1 % of a sphere 20 cells across.
_LEAST_FILL = 0.005

# Largest imaginary part given to the fractions of a layer between a metal and a dielectric is
# about a twentieth of this. Twice as much costs accuracy, half of it costs steps; the group
# "surfaces" of the validation tables both.
LAYER_DAMPING = 0.5


@dataclass(frozen=True, eq=False)
class System:
    """``(alpha^-1 - G) p = E`` on the occupied cells.

    Attributes
    ----------
    cells : shapes.Cells
    wavelength : float
        In vacuum, nm.
    n_host : float
        Refractive index of the host.
    permittivity : ndarray of complex, shape (m,)
        Of the cells' materials, relative to the host; the mean of the principal values where a
        material is anisotropic.
    index : ndarray of int32, shape (n, 3)
        Cells of the system (those of `cells` that hold material under the surface rule).
    alpha_inverse, alpha : CellTensor
        In nm^-3 and nm^3.
    convolution : Convolution
    tensors : ndarray of complex, shape (m, 3, 3), or None
        Permittivities relative to the host if a material is anisotropic.
    mixed : bool
        Products are in single precision, solutions and their residuals in double.
    """

    cells: Cells
    wavelength: float
    n_host: float
    permittivity: np.ndarray
    index: np.ndarray
    alpha_inverse: CellTensor
    alpha: CellTensor
    convolution: Convolution = field(repr=False)
    table: RadialTable = field(repr=False)
    tensors: np.ndarray | None = field(default=None, repr=False)
    mixed: bool = False

    @property
    def answer_dtype(self) -> np.dtype:
        """Complex number type of solutions."""
        return np.dtype(np.complex128) if self.mixed else self.dtype

    @property
    def mirrors(self) -> tuple[bool, bool, bool]:
        """Mirror planes across x, y and z that the cells and their materials have."""
        kept = (True, True, True) if self.tensors is None else kept_mirrors(self.tensors)
        x, y, z = (bool(a and b) for a, b in zip(self.cells.mirrors, kept, strict=True))
        return (x, y, z)

    @property
    def k(self) -> float:
        """Wave number in the host, 1/nm."""
        return 2 * np.pi * self.n_host / self.wavelength

    @property
    def n(self) -> int:
        """Number of cells in the system."""
        return len(self.index)

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of the system's matrix."""
        return (3 * self.n, 3 * self.n)

    @property
    def dtype(self) -> np.dtype:
        """Complex number type of the products."""
        return self.convolution.dtype

    @property
    def positions(self) -> np.ndarray:
        """Centres of the system's cells, shape (n, 3), nm."""
        return self.cells.origin + self.cells.spacing * self.index

    @property
    def r_eff(self) -> float:
        """Radius of the sphere of the particle's volume, nm."""
        return float((3 * self.cells.volume / (4 * np.pi)) ** (1 / 3))

    def matvec(self, p: np.ndarray) -> np.ndarray:
        """``alpha^-1 p - G p`` for a vector of 3n numbers (or an (n, 3) array)."""
        v = np.ascontiguousarray(p, self.dtype).reshape(-1, 3)
        out = self.convolution(self.index, v, np.empty_like(v))
        self.alpha_inverse.minus(v, out, self.convolution.workers)
        return out.reshape(np.shape(p))

    def precondition(self, r: np.ndarray) -> np.ndarray:
        """``alpha r``: the block-diagonal preconditioner."""
        v = np.ascontiguousarray(r, self.dtype).reshape(-1, 3)
        return self.alpha.apply(v, np.empty_like(v)).reshape(np.shape(r))


def system(
    cells: Cells,
    wavelength: float,
    host="water",
    *,
    materials: dict | None = None,
    surface: str = "window",
    polarizability: str = "fcd-corners",
    light=None,
    layer_damping: float = LAYER_DAMPING,
    precision: str = "double",
    fft: str = "auto",
    workers: Workers | None = None,
) -> System:
    """The system of a particle's cells at a wavelength.

    Parameters
    ----------
    cells : shapes.Cells
    wavelength : float
        In vacuum, nm.
    host : material
        Anything `dda.materials.find` takes, or a `Material`; it is isotropic.
    materials : dict, optional
        From a name used in `cells.materials` to a `Material` or a specification of one.
    surface : {"window", "cell", "whole"}
        Tensor of surface cells from the window of the design, from the cell's own fraction, or
        no surface treatment (a cell belongs to the material at its centre).
    polarizability : {"fcd-corners", "fcd", "ldr", "rr"}
        The first two go with the filtered Green tensor of the same name, the others with point
        dipoles.
    light : PlaneWave, optional
        Needed by "ldr" alone.
    layer_damping : float
        Strength of the loss in layers between a metal and a dielectric (see Notes); 0 is none.
    precision : {"double", "mixed", "single"}
        With "mixed", products are in single precision and the residual is corrected in double.
        Measured (benchmark "precision"): the same answers with half the kernel and 1.3 times as
        fast where steps are few (dielectrics, gold at its resonance), but no faster for gold in
        the red, and silver takes twice the steps; hence "double" by default.
    fft : {"auto", "scipy", "ducc0"}
    workers : Workers, optional
        Threads to use; all cores by default.

    Returns
    -------
    System

    Raises
    ------
    InputError
        If the host absorbs, a material has the host's permittivity exactly, an option is unknown
        or the spacing does not resolve the wave.

    Notes
    -----
    A surface cell holding the fractions f_m gets ``eps_t = sum f_m eps_m`` along the surface and
    ``1/eps_n = sum f_m/eps_m`` across it (Kottke, Farjadpour & Johnson 2008, Phys. Rev. E 77,
    036611; Piller 1997, Opt. Lett. 22, 1674). The fractions are those of a ball 2.2 spacings
    wide, which makes the error of the surface smooth in the spacing.

    Between a metal and a dielectric eps_t and 1/eps_n pass through zero, at different depths, and
    in between the layer carries short waves that only the metal's loss damps. The fractions
    therefore get an imaginary part, odd about one half, that makes the layer lossy at both zeros
    and pays it back elsewhere: its integral across the layer vanishes, so the answer changes by
    an amount that falls as d^2, like the other errors of the layer, while the solver needs a
    third of the steps. (This project's own.)

    Of anisotropic materials the tensors are mixed, see `dda.lattice.anisotropy`; the mean of the
    principal values decides whether one counts as a metal.
    """
    if surface not in SURFACES:
        raise InputError(f"surface {surface!r} is not known; use one of {', '.join(SURFACES)}")
    medium = _as_material(host, materials)
    _materials.require_transparent(medium, np.array([wavelength]))
    n_host = float(np.real(medium.index(np.array([wavelength]))[0]))
    found = [_as_material(name, materials) for name in cells.materials]
    if any(hasattr(m, "tensor") for m in found):
        eps = np.stack([_tensor(m, wavelength) for m in found])
    else:
        eps = np.array([m.permittivity(np.array([wavelength]))[0] for m in found], complex)
    return relative_system(
        cells,
        wavelength,
        n_host,
        eps / n_host**2,
        surface=surface,
        polarizability=polarizability,
        light=light,
        layer_damping=layer_damping,
        precision=precision,
        fft=fft,
        workers=workers,
    )


def relative_system(
    cells: Cells,
    wavelength: float,
    n_host: float,
    permittivity: np.ndarray,
    *,
    surface: str = "window",
    polarizability: str = "fcd-corners",
    light=None,
    layer_damping: float = LAYER_DAMPING,
    precision: str = "double",
    fft: str = "auto",
    workers: Workers | None = None,
) -> System:
    """As `system`, from the permittivities (m,) or (m, 3, 3) relative to the host themselves."""
    permittivity = np.asarray(permittivity, complex)
    tensors = permittivity if permittivity.ndim == 3 else None
    if tensors is not None:
        permittivity = np.trace(tensors, axis1=1, axis2=2) / 3
    _refuse_host(permittivity if tensors is None else tensors)
    k, d = 2 * np.pi * n_host / wavelength, cells.spacing
    if k * d >= np.pi / 2:
        raise InputError(
            f"spacing {d:.3g} nm is too coarse for {wavelength:.4g} nm light: at least four cells "
            f"a wavelength in the host are needed (spacing below {wavelength / n_host / 4:.3g} nm)"
        )
    s_factor = light.s_factor if light is not None else None

    def inverse(eps):
        return inverse_polarizability(eps, polarizability, k, d, s_factor)

    keep, parts, rest, where = _shares(cells, permittivity, surface, layer_damping)
    kept = np.flatnonzero(keep)
    normal = cells.normal[kept[where]]
    if tensors is None:
        along = parts @ permittivity + rest
        across = 1 / (parts[where] @ (1 / permittivity) + rest[where])
        full = uniaxial(inverse(along[where]), inverse(across), normal)
        alpha_inverse = CellTensor(inverse(along), where, full)
    else:
        alpha_inverse = anisotropic_cells(parts, rest, where, normal, tensors, inverse, d)
    index = np.ascontiguousarray(cells.index[kept])
    table = radial_table(
        polarizability if polarizability.startswith("fcd") else "point",
        d,
        k,
        int(sum((n - 1) ** 2 for n in cells.shape)),
    )
    mixed = precision == "mixed"
    convolution = Convolution(kernel(cells.shape, table, precision), None, fft, workers)
    return System(
        cells,
        float(wavelength),
        float(n_host),
        permittivity,
        index,
        alpha_inverse if mixed else alpha_inverse.astype(convolution.dtype),
        alpha_inverse.inverse().astype(convolution.dtype),
        convolution,
        table,
        tensors,
        mixed,
    )


def _refuse_host(eps: np.ndarray) -> None:
    """Raise InputError if a permittivity (m,) or a principal one of (m, 3, 3) is the host's."""
    if eps.ndim == 1 and np.any(eps == 1):
        raise InputError(
            "a material of the particle has exactly the host's permittivity, so it does nothing: "
            "leave it out of the particle or change the host"
        )
    if eps.ndim == 3 and np.any(np.linalg.svd(eps - np.eye(3), compute_uv=False) < 1e-12):
        raise InputError(
            "a material of the particle has exactly the host's permittivity along one of its "
            "axes; change either a little"
        )


def _shares(cells: Cells, eps: np.ndarray, surface: str, layer_damping: float):
    """Cells kept, their fractions of the materials and of the host, those with a surface."""
    if surface == "whole":
        keep = cells.centre_material >= 0
        parts = np.eye(len(eps), dtype=complex)[cells.centre_material[keep]]
        return keep, parts, np.zeros(len(parts)), np.empty(0, np.int64)
    filled = cells.window if surface == "window" else cells.fraction
    keep = filled.sum(axis=1) > _LEAST_FILL
    filled = filled[keep]
    host = np.clip(1 - filled.sum(axis=1), 0, 1)
    mixed = (filled.max(axis=1) < 1 - 1e-9) & (cells.normal[keep] != 0).any(axis=1)
    parts, rest = (
        _damped(filled, host, eps, layer_damping)
        if surface == "window"
        else (filled.astype(complex), host)
    )
    return keep, parts, rest, np.flatnonzero(mixed)


def _damped(filled: np.ndarray, host: np.ndarray, eps: np.ndarray, layer_damping: float):
    """Fractions of the materials and the host with the layer's imaginary part."""
    strength = layer_damping * np.clip(-eps.real, 0, 1)
    metal = filled @ (strength > 0)
    other = 1 - metal
    swing = (metal - 0.5) * (filled @ strength) * other
    with np.errstate(divide="ignore", invalid="ignore"):
        up = np.where(metal > 0, swing / metal, 0)
        down = np.where(other > 0, swing / other, 0)
    factor = np.where(strength > 0, up[:, None], -down[:, None])
    return filled * (1 + 1j * factor), host * (1 - 1j * down)


def _as_material(spec, overrides: dict | None):
    if isinstance(spec, str) and overrides and spec in overrides:
        spec = overrides[spec]
    return spec if hasattr(spec, "permittivity") else _materials.find(spec)


def _tensor(material, wavelength: float) -> np.ndarray:
    """Permittivity tensor of any material."""
    at = np.array([wavelength])
    if hasattr(material, "tensor"):
        return material.tensor(at)[0]
    return material.permittivity(at)[0] * np.eye(3)


def memory_estimate(shape: tuple[int, int, int], n: int, precision: str = "double") -> int:
    """Bytes at the peak of one solve with `n` cells on a box of `shape` cells.

    Counts the kernel and its assembly, the columns along x, the Krylov vectors, the
    polarizabilities and the description of the cells.
    """
    item = 16 if precision == "double" else 8
    lx, ly, lz = padded_shape(shape)
    half = (lx // 2 + 1) * (ly // 2 + 1) * (lz // 2 + 1)
    kernel = 6 * half * item
    assembly = 3 * half * 16  # one component and its transforms, always in double precision
    # Mixed precision has residuals, and the buffers they take, in double.
    columns = 3 * lx * shape[1] * shape[2] * (8 if precision == "single" else 16)
    vectors = (8 * item + (24 if precision == "mixed" else 0)) * 3 * n
    cells = 180 * n
    return int(max(kernel + assembly, kernel + columns + vectors) + cells)
