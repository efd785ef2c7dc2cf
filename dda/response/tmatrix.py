"""The T-matrix of a particle: all it does to light of one wavelength, from any side."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from scipy.sparse import csr_array

from ..errors import InputError
from .vector_waves import order_of, plane_wave_coefficients, spectra, wave_labels
from .wave_rotations import rotation_matrix


@dataclass(frozen=True, eq=False)
class TMatrix:
    """Outgoing amplitudes f = T p from those of the regular waves of the incident field.

    Attributes
    ----------
    matrix : ndarray of complex, shape (2 N (N+2),) * 2
        Between complex vector spherical waves, rows and columns ordered as `labels`; see
        `dda.response.vector_waves` for their definition. Dimensionless; time dependence
        exp(-i w t). For a sphere the diagonal holds minus the Mie coefficients b_n (M waves) and
        a_n (N waves) of Bohren & Huffman (1983).
    wavelength : float
        In vacuum, nm.
    n_host : float
        Refractive index of the host.
    origin : ndarray, shape (3,)
        Centre of the waves in the particle's coordinates, nm.
    radius : float
        Of a sphere around the origin that holds the particle, nm.
    r_eff : float
        Radius of the sphere of the particle's volume, nm.
    order_error : float
        Estimate of what the multipoles left out would add to the orientation average of C_ext,
        C_abs or C_sca, nm^2.
    solver_error : float
        Estimate of the error of the orientation averages from the iterative solution, nm^2.
    products : float
        Products with the interaction matrix it took, in units of one with all cells (one of a
        sector of m mirror planes counts 2^-m).
    status : str
        "converged", or that of the worst column.
    """

    matrix: np.ndarray = field(repr=False)
    wavelength: float
    n_host: float
    origin: np.ndarray
    radius: float
    r_eff: float
    order_error: float = 0.0
    solver_error: float = 0.0
    products: float = 0.0
    status: str = "converged"

    @property
    def k(self) -> float:
        """Wave number in the host, 1/nm."""
        return 2 * np.pi * self.n_host / self.wavelength

    @property
    def order(self) -> int:
        """Highest order N of the waves."""
        return order_of(len(self.matrix))

    @property
    def labels(self) -> np.ndarray:
        """Kind (0 for M, 1 for N), order n and degree m of the waves, shape (2 N (N+2), 3)."""
        return wave_labels(self.order)

    def rotated(self, rotation) -> TMatrix:
        """T-matrix of the particle turned about its origin.

        Parameters
        ----------
        rotation : array_like, shape (3, 3)
            Orthogonal matrix; with determinant -1 it gives the mirror image of the particle.

        Examples
        --------
        >>> import dda, shapes
        >>> cells = shapes.voxelize(shapes.rod(40, 16, axis="z", material="gold"), cells=10)
        >>> along_z = dda.t_matrix(dda.system(cells, wavelength=600))
        >>> along_x = along_z.rotated([[0, 0, 1], [0, 1, 0], [-1, 0, 0]])
        >>> light = (0, 0, 1), (1, 0, 0)
        >>> along_x.cross_sections(*light)[0] > 3 * along_z.cross_sections(*light)[0]
        True
        """
        turn = csr_array(rotation_matrix(self.order, rotation))
        return replace(self, matrix=turn @ (turn.conj() @ self.matrix.T).T)

    def truncated(self, order: int) -> TMatrix:
        """The waves up to an order at most the present one."""
        if not 1 <= order <= self.order:
            raise InputError(f"order {order} is not between 1 and the T-matrix's {self.order}")
        keep = self.labels[:, 1] <= order
        return replace(self, matrix=self.matrix[np.ix_(keep, keep)])

    def scattered(self, direction, polarization) -> np.ndarray:
        """Outgoing amplitudes for a plane wave with phase zero at the origin, (2 N (N+2),)."""
        return self.matrix @ plane_wave_coefficients(self.order, direction, polarization)

    def cross_sections(self, direction, polarization) -> tuple[float, float, float]:
        """C_ext, C_abs, C_sca in nm^2 for a plane wave.

        Parameters
        ----------
        direction, polarization : array_like, shape (3,)
            Unit vectors, perpendicular to each other; the polarization may be complex.
        """
        incident = plane_wave_coefficients(self.order, direction, polarization)
        outgoing = self.matrix @ incident
        extinction = -float(np.vdot(incident, outgoing).real) / self.k**2
        scattering = float(np.sum(abs(outgoing) ** 2)) / self.k**2
        return extinction, extinction - scattering, scattering

    def scattering_amplitude(self, direction, polarization, outgoing_directions) -> np.ndarray:
        """Vector amplitude F with ``E_sca -> F exp(ikr)/r``, shape (d, 3), nm.

        Parameters
        ----------
        direction, polarization : array_like, shape (3,)
            Of the incident plane wave, unit vectors.
        outgoing_directions : array_like, shape (d, 3)
            Unit vectors.
        """
        angular = spectra(self.order, outgoing_directions)
        return -1j / self.k * (angular @ self.scattered(direction, polarization))

    def reciprocity(self) -> float:
        """Departure from reciprocity, ``|T - T'| / |T|``, zero for every particle.

        T' is the T-matrix of the reversed processes, ``T'(n m, n' m') = (-1)^(m+m')
        T(n' -m', n -m)`` (Waterman 1971).
        """
        kind, n, m = self.labels.T
        count = self.order * (self.order + 2)
        reversed_ = kind * count + n * (n + 1) - m - 1
        sign = (-1.0) ** m
        other = sign[:, None] * self.matrix[np.ix_(reversed_, reversed_)].T * sign
        return float(np.linalg.norm(self.matrix - other) / np.linalg.norm(self.matrix))

    def unitarity(self) -> float:
        """Departure from ``S^H S = 1``, S = 1 + 2 T, zero for a particle without losses.

        The norm of ``T + T^H + 2 T^H T`` over that of ``T + T^H``: about C_abs over C_ext.
        """
        loss = self.matrix + self.matrix.conj().T
        rest = loss + 2 * self.matrix.conj().T @ self.matrix
        return float(np.linalg.norm(rest) / np.linalg.norm(loss))

    def passivity(self) -> float:
        """Most gain of any incident field: the largest eigenvalue of ``S^H S - 1``, at most 0."""
        s = np.eye(len(self.matrix)) + 2 * self.matrix
        return float(np.linalg.eigvalsh(s.conj().T @ s)[-1] - 1)
