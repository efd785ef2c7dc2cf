"""Two particles at a distance from their T-matrices."""

from __future__ import annotations

import warnings
from dataclasses import dataclass, replace

import numpy as np

from ..errors import InputError
from .tmatrix import TMatrix
from .translation import outgoing_to_regular, regular_to_regular
from .vector_waves import plane_wave_coefficients, wave_labels


@dataclass(frozen=True, eq=False)
class Pair:
    """Two particles that see each other's scattered light.

    Attributes
    ----------
    first, second : TMatrix
    separation : ndarray, shape (3,)
        Origin of the second less that of the first, nm.
    response : tuple of tuples of ndarray
        ``response[i][j]``: outgoing amplitudes about origin i from the amplitudes of the incident
        light about origin j, all scattering between the particles included.
    """

    first: TMatrix
    second: TMatrix
    separation: np.ndarray
    response: tuple[tuple[np.ndarray, np.ndarray], tuple[np.ndarray, np.ndarray]]

    @property
    def k(self) -> float:
        """Wave number in the host, 1/nm."""
        return self.first.k

    @property
    def places(self) -> tuple[np.ndarray, np.ndarray]:
        """Origins of the two, the middle between them at zero, nm."""
        return -self.separation / 2, self.separation / 2

    def cross_sections(self, direction, polarization) -> tuple[float, float, float]:
        """C_ext, C_abs, C_sca in nm^2 for a plane wave.

        Parameters
        ----------
        direction, polarization : array_like, shape (3,)
            Unit vectors, perpendicular to each other; the polarization may be complex.
        """
        light = self._incident(direction, polarization)
        leaving = [sum(self.response[i][j] @ light[j] for j in range(2)) for i in range(2)]
        c_ext = -sum(np.vdot(light[i], leaving[i]).real for i in range(2)) / self.k**2
        shared = self._shared
        c_sca = sum(np.sum(abs(f) ** 2) for f in leaving)
        c_sca += 2 * np.vdot(leaving[0], shared @ leaving[1]).real
        c_sca /= self.k**2
        return float(c_ext), float(c_ext - c_sca), float(c_sca)

    def orientation_average(self) -> tuple[float, float, float]:
        """C_ext, C_abs, C_sca in nm^2 averaged over orientations of the rigid pair.

        Exact: the averaged products of incident amplitudes about two places are the translation
        of regular waves between them, and so are the shared radiated powers.
        """
        # H[i][j] = translation of outgoing amplitudes about j as seen from i
        one = [np.eye(len(t.matrix)) for t in (self.first, self.second)]
        shared = [[one[0], self._shared], [self._shared.conj().T, one[1]]]
        c_ext = -sum(
            np.trace(self.response[i][j] @ shared[j][i]).real for i in range(2) for j in range(2)
        )
        whole = np.block([list(row) for row in self.response])
        joint = np.block(shared)
        c_sca = np.trace(whole.conj().T @ joint @ whole @ joint).real
        factor = 2 * np.pi / self.k**2
        return float(factor * c_ext), float(factor * (c_ext - c_sca)), float(factor * c_sca)

    def t_matrix(self, order: int | None = None) -> TMatrix:
        """One T-matrix of the pair about the middle between the two origins.

        Parameters
        ----------
        order : int, optional
            Highest order; by default what the size of the pair asks for.
        """
        half = float(np.linalg.norm(self.separation)) / 2
        radius = half + max(self.first.radius, self.second.radius)
        if order is None:
            reach = self.k * radius
            order = int(np.ceil(reach + 4 * reach ** (1 / 3) + 2))
        to = [
            regular_to_regular(t.order, order, place, self.k)
            for t, place in zip((self.first, self.second), self.places, strict=True)
        ]
        total = sum(
            to[i].conj().T @ self.response[i][j] @ to[j] for i in range(2) for j in range(2)
        )
        one, two = self.first, self.second
        worst = [t.status for t in (one, two) if t.status != "converged"]
        return replace(
            one,
            matrix=np.asarray(total),
            origin=np.zeros(3),
            radius=radius,
            r_eff=(one.r_eff**3 + two.r_eff**3) ** (1 / 3),
            order_error=one.order_error + two.order_error,
            solver_error=one.solver_error + two.solver_error,
            products=one.products + two.products,
            status=worst[0] if worst else "converged",
        )

    @property
    def _shared(self) -> np.ndarray:
        """Takes outgoing amplitudes about the second origin to what they are about the first."""
        # regular waves: amplitudes about the second from those about the first, conjugated
        to = regular_to_regular(self.second.order, self.first.order, self.separation, self.k)
        return to.conj().T

    def _incident(self, direction, polarization) -> list[np.ndarray]:
        a = np.asarray(direction, float)
        return [
            np.exp(1j * self.k * (place @ a)) * plane_wave_coefficients(t.order, a, polarization)
            for t, place in zip((self.first, self.second), self.places, strict=True)
        ]


def pair(first: TMatrix, second: TMatrix, separation) -> Pair:
    """Combine two particles at a distance.

    Parameters
    ----------
    first, second : TMatrix
        Of the same wavelength and host.
    separation : array_like, shape (3,)
        Origin of the second less that of the first, nm.

    Returns
    -------
    Pair

    Raises
    ------
    InputError
        If the wavelengths or hosts differ, or the origins coincide.

    Warns
    -----
    RuntimeWarning
        If the spheres around the particles overlap: then outgoing waves of one are used where
        they do not converge.

    Notes
    -----
    ``f_1 = T_1 (p_1 + A_12 f_2)`` and the same for the second (Waterman & Truell 1961; Peterson &
    Strom 1973). Narrow gaps need many multipoles: give `t_matrix` an order of about 5/acosh(1 +
    gap/diameter) for a per cent, and a residual.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=8)
    >>> t = dda.t_matrix(dda.system(cells, wavelength=530), order=3)
    >>> both = pair(t, t, (60, 0, 0))
    >>> c_ext, _, _ = both.cross_sections((0, 0, 1), (1, 0, 0))
    >>> bool(c_ext > 2 * t.cross_sections((0, 0, 1), (1, 0, 0))[0])  # they help each other
    True
    """
    if first.wavelength != second.wavelength or first.n_host != second.n_host:
        raise InputError(
            f"the two T-matrices are for {first.wavelength:g} and {second.wavelength:g} nm in "
            f"hosts of index {first.n_host:g} and {second.n_host:g}: they must be the same"
        )
    d = np.asarray(separation, float)
    distance = float(np.linalg.norm(d))
    if d.shape != (3,) or not distance > 0:
        raise InputError(f"the separation must be three numbers, not all zero; got {separation}")
    if distance < first.radius + second.radius:
        warnings.warn(
            f"the spheres around the particles (radii {first.radius:.4g} and {second.radius:.4g} "
            f"nm) overlap at a distance of {distance:.4g} nm: the answer may not converge",
            RuntimeWarning,
            stacklevel=2,
        )
    k = first.k
    t = [first.matrix, second.matrix]
    hop = [
        outgoing_to_regular(first.order, second.order, -d, k),
        outgoing_to_regular(second.order, first.order, d, k),
    ]
    sizes = [_sizes(x) for x in (first, second)]
    answers = []
    for i in range(2):
        j = 1 - i
        # f_i = T_i (p_i + A_ij T_j (p_j + A_ji f_i)), in units of the waves on the particles
        loop = t[i] @ hop[i] @ t[j] @ hop[j]
        matrix = np.eye(len(loop)) - loop / sizes[i][:, None] * sizes[i]
        own = sizes[i][:, None] * np.linalg.solve(matrix, t[i] / sizes[i][:, None])
        other = sizes[i][:, None] * np.linalg.solve(
            matrix, (t[i] @ hop[i] @ t[j]) / sizes[i][:, None]
        )
        answers.append((own, other) if i == 0 else (other, own))
    return Pair(first, second, d, (answers[0], answers[1]))


def _sizes(t: TMatrix) -> np.ndarray:
    """Small-argument size of regular waves on the particle, (kr)^n/(2n+1)!!.

    Amplitudes of high orders run over many decades; divided by these they do not.
    """
    n = wave_labels(t.order)[:, 1]
    logs = np.cumsum(np.log(2.0 * np.arange(t.order + 1) + 1))
    return np.exp(n * np.log(t.k * t.radius) - logs[n])
