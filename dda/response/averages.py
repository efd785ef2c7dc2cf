"""Averages over all orientations of a particle, analytic from its T-matrix."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from scipy.sparse import csr_array

from .efficiencies import Efficiencies
from .tmatrix import TMatrix
from .vector_waves import complex_numbers, gradients

# Absorption below this part of extinction is asked for to the tolerance times this part only.
LEAST_ABSORPTION = 0.02


@dataclass(frozen=True)
class OrientationAverage(Efficiencies):
    """Cross sections in nm^2 averaged over orientations, for unpolarized light.

    Attributes
    ----------
    c_ext, c_abs, c_sca : float
    asymmetry : float
        Mean cosine of the scattering angle.
    cd_ext, cd_abs : float
        Circular dichroism: extinction and absorption of left circular light less that of right.
    c_ext_error, c_abs_error, c_sca_error : float
        What the way of averaging may be off by (multipoles or directions left out, the solver),
        not the spacing of the cells.
    area : float
        pi r_eff^2.
    way : {"t-matrix", "quadrature"}
    order : int
        Highest multipole order, or the number of directions.
    products : float
        Products with the interaction matrix, in units of one with all cells.
    status : str
    """

    c_ext: float
    c_abs: float
    c_sca: float
    asymmetry: float
    cd_ext: float
    cd_abs: float
    c_ext_error: float
    c_abs_error: float
    c_sca_error: float
    area: float
    way: str = "t-matrix"
    order: int = field(default=0)
    products: float = 0.0
    status: str = "converged"

    @property
    def g_ext(self) -> float:
        """Dissymmetry factor of extinction, ``2 (L - R) / (L + R)``."""
        return self.cd_ext / self.c_ext

    @property
    def g_abs(self) -> float:
        """Dissymmetry factor of absorption."""
        return self.cd_abs / self.c_abs if self.c_abs != 0 else 0.0


def orientation_average(t: TMatrix) -> OrientationAverage:
    """Average over all orientations.

    Parameters
    ----------
    t : TMatrix

    Returns
    -------
    OrientationAverage

    Notes
    -----
    ``<C_ext> = -(2 pi/k^2) Re Tr T`` and ``<C_sca> = (2 pi/k^2) sum |T|^2``; for left circular
    light both with T restricted to incident waves M + N, and twice the prefactor.

    References
    ----------
    Mishchenko, M. I. (1990), Astrophys. Space Sci. 164, 1.
    Mackowski, D. W., Mishchenko, M. I. (1996), J. Opt. Soc. Am. A 13, 2266.

    Examples
    --------
    >>> import dda, shapes
    >>> from dda.response.tmatrix_solve import t_matrix
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> average = orientation_average(t_matrix(dda.system(cells, wavelength=530)))
    >>> 1400 < average.c_ext < 1500, abs(average.g_ext) < 1e-6
    (True, True)
    """
    count = len(t.matrix) // 2
    blocks = t.matrix.reshape(2, count, 2, count)
    factor = 2 * np.pi / t.k**2
    by_kind = np.einsum("iljl->ij", blocks).real
    c_ext = -factor * float(by_kind[0, 0] + by_kind[1, 1])
    c_sca = factor * float(np.sum(abs(t.matrix) ** 2))
    cd_ext = -2 * factor * float(by_kind[0, 1] + by_kind[1, 0])
    # |T (M + N)|^2 - |T (M - N)|^2 over two, summed over the waves
    cd_sca = 4 * factor * float(np.vdot(blocks[:, :, 0], blocks[:, :, 1]).real)
    error = float(np.hypot(t.order_error, t.solver_error))
    return OrientationAverage(
        c_ext=c_ext,
        c_abs=c_ext - c_sca,
        c_sca=c_sca,
        asymmetry=_asymmetry(t),
        cd_ext=cd_ext,
        cd_abs=cd_ext - cd_sca,
        c_ext_error=error,
        c_abs_error=error,
        c_sca_error=error,
        area=float(np.pi * t.r_eff**2),
        order=t.order,
        products=t.products,
        status=t.status,
    )


def _asymmetry(t: TMatrix) -> float:
    """Mean cosine of the scattering angle.

    The mean of the outgoing direction u over a wave field is a matrix V between its amplitudes,
    and the same matrix is the mean over the incident directions, so that
    ``<C_sca cos> = (2 pi/k^2) Re sum_i Tr(V_i T V_i T^H)``. A factor u_i in the spectrum of a wave
    is the derivative -i d/dx_i / k of the wave.
    """
    total = 0.0
    numbers = complex_numbers(t.order)
    back = t.matrix.conj().T
    for slope in gradients(t.order + 1):
        mean = csr_array(sum(n.conj().T @ slope @ n for n in numbers))
        total -= float(np.sum((mean @ t.matrix) * (mean @ back).T).real)
    return total / float(np.sum(abs(t.matrix) ** 2))
